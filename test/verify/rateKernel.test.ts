// The SIMD kernel against the verifier's own code, its tanh against Node's, and its build against what is committed.
import { execFileSync } from "node:child_process";
import { mkdtempSync, readFileSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import { join, resolve } from "node:path";
import { describe, expect, it } from "vitest";
import { newModelPoint } from "../../src/model/controlAffine.js";
import { fittedModel } from "../../src/model/fittedModel.js";
import { type DualMetricFile, dualMetric } from "../../src/nets/dualMetric.js";
import { featureSlope, featureValue } from "../../src/nets/features.js";
import { rangeAndNull } from "../../src/num/dense.js";
import { seededRandom } from "../../src/num/random.js";
import { readPlant } from "../../src/plant/readPlant.js";
import { condition } from "../../src/verify/condition.js";
import { batchRates } from "../../src/verify/kernel/batchRates.js";
import { rateKernel } from "../../src/verify/kernel/rateKernel.js";
import { scanPoints } from "../../src/verify/scanPoints.js";
import { randomModel, randomNetworkMetric } from "../support/randomSystem.js";

describe("the rate kernel", () => {
  for (const [n, m, width] of [
    [2, 1, 5],
    [3, 1, 8],
    [4, 2, 7],
    [6, 2, 16],
    [7, 3, 9],
  ] as const) {
    it(`gives the rates of condition.ts for n=${n}, m=${m}`, () => {
      const random = seededRandom(100 + n);
      const model = randomModel(random, n, m, 1);
      const file = randomNetworkMetric(random, n, model.active, width) as Extract<DualMetricFile, { kind: "network" }>;
      const here = condition(model, dualMetric(file));
      const count = 13;
      const kernel = rateKernel({ n, m, w0: file.w0, mlp: file.mlp, corners: here.corners }, count);
      const point = newModelPoint(n, m, model.p);
      const z = new Float64Array(n);
      const P = new Float64Array(n * (n - m));
      const expected: number[] = [];
      for (let at = 0; at < count; at++) {
        const active = Float64Array.from(model.active, () => 2 * random.uniform() - 1);
        expected.push(here.moveTo(active) ? here.rate().rate : Number.NaN);
        model.embed(active, z);
        model.evaluate(z, point);
        rangeAndNull(point.B, new Float64Array(n * m), P, n, m, new Float64Array(n * n + n * m));
        const s = Float64Array.from(file.features, (f) => featureValue(f, z[f.state]!));
        const tangents = Float64Array.from({ length: (m + 1) * s.length }, (_, e) => {
          const [d, f] = [Math.floor(e / s.length), file.features[e % s.length]!];
          return featureSlope(f, z[f.state]!) * (d === 0 ? point.f[f.state]! : point.B[f.state * m + d - 1]!);
        });
        const A = Float64Array.from({ length: here.corners.length * n * n }, (_, e) => {
          const [c, i] = [Math.floor(e / (n * n)), e % (n * n)];
          let sum = point.dfdx[i]!;
          for (let j = 0; j < m; j++) sum += here.corners[c]![j]! * point.dBdx[j * n * n + i]!;
          return sum;
        });
        kernel.set(at, s, tangents, A, P);
      }
      const found = kernel.run(count);
      for (let at = 0; at < count; at++) {
        expect(Math.abs(found[at]! - expected[at]!)).toBeLessThan(1e-11 * (1 + Math.abs(expected[at]!)));
      }
    });
  }
  it("gives the scan of the bundled boat's metric, in the body frame, the values that condition.ts does", () => {
    const at = (name: string): string => resolve(import.meta.dirname, `../bench/proofArtifacts/${name}`);
    const path = resolve(import.meta.dirname, "../../configs/survey-boat.yaml");
    const read = readPlant(readFileSync(path, "utf8"), path);
    if (!read.ok) throw new Error("the plant file does not read");
    const { residual, metric } = JSON.parse(readFileSync(at("survey-boat.json"), "utf8"));
    const model = fittedModel(read.plant, residual);
    const here = condition(model, dualMetric(metric));
    const points = scanPoints(3, 700);
    const found = batchRates(model, metric)!(points);
    found.forEach((rate, i) => {
      here.moveTo(points.subarray(3 * i, 3 * i + 3));
      expect(Math.abs(rate - here.rate().rate)).toBeLessThan(1e-12 * (1 + Math.abs(rate)));
    });
    expect(batchRates(model, { kind: "constant", n: 6, W: new Array<number>(36).fill(0) })).toBeNull();
  });
  it("has a tanh of a few units in the last place: through a network of one neuron", () => {
    // n = 2, m = 1: L = [[0], [0, y]] with y = 1 + tanh(s): the rate is a known function of it
    const random = seededRandom(9);
    const mlp = {
      layers: [
        { weights: [[1]], bias: [0] },
        { weights: [[0], [0], [1]], bias: [0, 0, 0] },
      ],
    };
    const kernel = rateKernel({ n: 2, m: 1, w0: 1e-300, mlp, corners: [Float64Array.of(0)] }, 400);
    const values = Float64Array.from({ length: 400 }, (_, i) =>
      i < 200 ? 20 * random.uniform() : 10 ** (-12 * random.uniform()),
    );
    // A = 0, P = e_2, tangent 1: rate = 1/2 * 2 y y' / y^2 = (1 - t^2) / t
    values.forEach((s, at) => {
      kernel.set(at, Float64Array.of(s), Float64Array.of(1, 0), new Float64Array(4), Float64Array.of(0, 1));
    });
    const found = kernel.run(400);
    values.forEach((s, at) => {
      const t = Math.tanh(s);
      const exact = (1 - t * t) / t;
      // 1 - t^2 cancels for large s: what is left of it is as exact as t is
      expect(Math.abs(found[at]! - exact)).toBeLessThan(2e-15 / t + 1e-14 * exact);
    });
  });
  it("is what the committed source builds to", () => {
    const folder = mkdtempSync(join(tmpdir(), "kernel-"));
    const source = resolve(import.meta.dirname, "../../src/verify/kernel");
    execFileSync(process.execPath, [join(source, "assembly/build.mjs"), join(folder, "made.ts")]);
    expect(readFileSync(join(folder, "made.ts"), "utf8")).toBe(readFileSync(join(source, "rateKernelWasm.ts"), "utf8"));
    rmSync(folder, { recursive: true });
  });
});
