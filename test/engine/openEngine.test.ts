import type * as Tf from "@tensorflow/tfjs-core";
import { describe, expect, it } from "vitest";
import { ENGINE_CANDIDATES, openEngine } from "../../src/engine/openEngine.js";

const named = (name: string) => ENGINE_CANDIDATES.filter((candidate) => candidate.name === name);

describe("the learning engine", () => {
  it("opens and agrees with the float64 code, quietly", async () => {
    const engine = await openEngine();
    expect(["native", "wasm"]).toContain(engine.name);
    expect(engine.probe.relativeError).toBeLessThan(1e-5);
    for (const other of engine.rejected) expect(other.reason).not.toBe("");
  });
  it.each(["wasm", "cpu"])("opens %s alone, as where the native package is absent", async (name) => {
    const engine = await openEngine(named(name));
    expect(engine.name).toBe(name);
    expect(engine.version).toMatch(/^4\./);
    expect(engine.probe.relativeError).toBeLessThan(1e-5);
    expect(engine.rejected).toEqual([]);
  });
  it("passes over an absent, a broken and a lying engine, and says why", async () => {
    const [wasm] = named("wasm");
    const absent = Object.assign(new Error("Cannot find module 'x'\nRequire stack:\n- y"), {
      code: "MODULE_NOT_FOUND",
    });
    const lying = async (): Promise<typeof Tf> => {
      const tf = await wasm!.open();
      return { ...tf, tanh: (x: Tf.Tensor) => tf.mul(tf.tanh(x), 1.01) } as object as typeof Tf;
    };
    const engine = await openEngine([
      { name: "native", open: () => Promise.reject(absent) },
      { name: "native", open: () => Promise.reject("the add-on does not load") },
      { name: "cpu", open: lying },
      wasm!,
    ]);
    expect(engine.name).toBe("wasm");
    expect(engine.rejected.slice(0, 2)).toEqual([
      { name: "native", reason: "Cannot find module 'x'" },
      { name: "native", reason: "the add-on does not load" },
    ]);
    expect(engine.rejected[2]!.reason).toMatch(/^off the float64 code by/);
  });
  it("says what to do when no engine can be used", async () => {
    const gone = { name: "wasm", open: () => Promise.reject(new Error("no such file")) } as const;
    await expect(openEngine([gone])).rejects.toThrow(/wasm: no such file.*npm ci/);
  });
});
