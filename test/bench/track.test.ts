// How long one call of the tracking law takes along a run, path warm-started: a network metric of width 16 that depends on
// every state (the worst case: no symmetry to reduce), random smooth models. Medians go to trackRecord.json.
import { writeFileSync } from "node:fs";
import { cpus } from "node:os";
import { resolve } from "node:path";
import { afterAll, describe, expect, it } from "vitest";
import type { newModelPoint } from "../../src/model/controlAffine.js";
import { dualMetric } from "../../src/nets/dualMetric.js";
import { seededRandom } from "../../src/num/random.js";
import { trackingLaw } from "../../src/track/trackingLaw.js";
import { randomNetworkMetric } from "../support/randomSystem.js";

/** States, inputs, most microseconds a call (median). */
const CASES = [
  { n: 4, m: 2, ceiling: 100 },
  { n: 6, m: 2, ceiling: 200 },
];
const CALLS = 20_000;

const record: unknown[] = [];
afterAll(() => {
  const file = { processor: cpus()[0]?.model ?? "unknown", node: globalThis.process.version, cases: record };
  writeFileSync(resolve(import.meta.dirname, "trackRecord.json"), `${JSON.stringify(file, null, 2)}\n`);
});

describe("one call of the tracking law, one thread", () => {
  for (const { n, m, ceiling } of CASES) {
    it(`${n} states`, () => {
      const random = seededRandom(n);
      const states = Array.from({ length: n }, (_, i) => i);
      const metric = dualMetric(randomNetworkMetric(random.stream("metric"), n, states, 16));
      const model = plainModel(n, m);
      const law = trackingLaw(model, metric);
      const z = new Float64Array(n);
      const plan = new Float64Array(n);
      const input = new Float64Array(m);
      const phase = Float64Array.from({ length: n }, () => 6 * random.uniform());
      const micros = new Float64Array(CALLS);
      let iterations = 0;
      let converged = 0;
      let energy = 0;
      // 20 ms between calls; states swing through the envelope, the error through half a unit
      for (let k = -2000; k < CALLS; k++) {
        const t = 0.02 * k;
        for (let i = 0; i < n; i++) {
          plan[i] = 0.6 * Math.sin(0.4 * t + phase[i]!);
          z[i] = plan[i]! + 0.25 * Math.sin(0.9 * t + 2 * phase[i]!);
        }
        const start = performance.now();
        const { path } = law.step(z, plan, input, 0.2);
        const used = performance.now() - start;
        if (k < 0) continue;
        micros[k] = 1000 * used;
        iterations += path.iterations;
        energy += path.energy;
        if (path.status === "converged") converged++;
      }
      micros.sort();
      const median = micros[CALLS / 2]!;
      record.push({
        states: n,
        inputs: m,
        width: 16,
        calls: CALLS,
        medianMicroseconds: Number(median.toFixed(1)),
        p99Microseconds: Number(micros[Math.floor(0.99 * CALLS)]!.toFixed(1)),
        meanIterations: Number((iterations / CALLS).toFixed(2)),
        meanEnergy: Number((energy / CALLS).toFixed(3)),
        convergedShare: converged / CALLS,
        ceilingMicroseconds: ceiling,
      });
      expect(converged).toBe(CALLS);
      expect(median).toBeLessThan(ceiling);
    });
  }
});

/** A cheap smooth model: the law's own cost is what counts. */
function plainModel(n: number, m: number) {
  return {
    n,
    m,
    p: 0,
    active: Array.from({ length: n }, (_, i) => i),
    rotation: null,
    embed: (active: Float64Array, z: Float64Array): void => z.set(active),
    evaluate: (z: Float64Array, out: ReturnType<typeof newModelPoint>): void => {
      out.B.fill(0);
      for (let i = 0; i < n; i++) out.f[i] = i + 1 < n ? z[i + 1]! : Math.sin(z[0]!);
      for (let j = 0; j < m; j++) out.B[(n - m + j) * m + j] = 1;
    },
  };
}
