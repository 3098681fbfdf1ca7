// The bundled logs: what the issue of the data promises, and that the committed script makes them again byte for byte.
import { createHash } from "node:crypto";
import { readdirSync, readFileSync, statSync } from "node:fs";
import { join, resolve } from "node:path";
import { describe, expect, it } from "vitest";
import { DATA_SETS } from "../../data/make/dataSets.js";
import { logFile } from "../../data/make/logFile.js";
import { rungeKutta } from "../../data/make/simulate.js";
import { intakeLogs } from "../../src/logs/intake.js";
import { readPlan } from "../../src/logs/readPlan.js";
import { supportOf } from "../../src/logs/support.js";
import { readPlant } from "../../src/plant/readPlant.js";

const data = resolve(import.meta.dirname, "../../data");
const configs = resolve(import.meta.dirname, "../../configs");
const readAt = (path: string) => {
  const result = readPlant(readFileSync(path, "utf8"), path);
  if (!result.ok) throw new Error(JSON.stringify(result.problems));
  return result.plant;
};
const hashOf = (bytes: Uint8Array): string => createHash("sha256").update(bytes).digest("hex");

describe("the bundled logs", () => {
  it.each(DATA_SETS.map((set) => [set.name, set] as const))("%s is what the script makes", (name, set) => {
    const saved = readFileSync(join(data, `${name}.arrow`));
    expect(hashOf(logFile(set))).toBe(hashOf(saved));
    expect(readFileSync(join(data, "README.md"), "utf8")).toContain(hashOf(saved));
  });
  it("stay under 10 MB together", () => {
    const sizes = readdirSync(data)
      .filter((name) => name.endsWith(".arrow"))
      .map((name) => statSync(join(data, name)).size);
    expect(sizes.length).toBe(6);
    expect(sizes.reduce((a, b) => a + b)).toBeLessThan(10e6);
  });
  it.each(["orchard-rover", "yard-crane", "survey-boat"])(
    "%s: 60 runs and more at 50 Hz, 30 and more after the change, no run dropped",
    async (name) => {
      const plant = readAt(join(configs, `${name}.yaml`));
      const first = await intakeLogs(plant);
      expect(first.runs.length).toBeGreaterThanOrEqual(60);
      expect(first.sampleInterval).toBeCloseTo(0.02, 6);
      // values outside the envelope are information; nothing else is to be said of them
      expect(new Set(first.findings.map(({ kind }) => kind)).size).toBeLessThanOrEqual(1);
      expect(first.findings.every(({ kind }) => kind === "outsideEnvelope")).toBe(true);
      expect(supportOf(plant, first.runs).unsupportedShare).toBe(0);
      const [second] = DATA_SETS.filter((set) => set.name.startsWith(`${name}-`));
      const changed = await intakeLogs({
        ...plant,
        logs: { ...plant.logs, files: [join(data, `${second!.name}.arrow`)] },
      });
      expect(changed.runs.length).toBeGreaterThanOrEqual(30);
      const plan = await readPlan(plant, join(data, "plans", `${name}.csv`));
      expect(plan.time.length).toBeGreaterThan(100);
    },
  );
});

describe("the data maker's integrator", () => {
  it("is the classical Runge-Kutta method: one step of x' = -x, h = 0.1", () => {
    expect(rungeKutta((_, x) => [-x[0]!], 0, [1], 0.1)[0]).toBeCloseTo(0.9048375, 14);
  });
  it("is of fourth order", () => {
    const end = (steps: number): number => {
      let x: number[] = [1];
      for (let k = 0; k < steps; k++) x = rungeKutta((t, [y]) => [y! * Math.cos(t)], k / steps, x, 1 / steps);
      return Math.abs(x[0]! - Math.exp(Math.sin(1)));
    };
    expect(Math.log2(end(16) / end(32))).toBeCloseTo(4, 1);
  });
});
