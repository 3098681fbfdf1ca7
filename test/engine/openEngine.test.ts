import { expect, it } from "vitest";
import { openEngine } from "../../src/engine/openEngine.js";

it("opens an engine that agrees with the float64 code, quietly", async () => {
  const engine = await openEngine();
  expect(["native", "wasm"]).toContain(engine.name);
  expect(engine.probe.relativeError).toBeLessThan(1e-5);
  for (const other of engine.rejected) expect(other.reason).not.toBe("");
});
