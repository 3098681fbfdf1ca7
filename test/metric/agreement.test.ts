import { describe, expect, it } from "vitest";
import { type BatchMember, batchObjective } from "../../src/metric/batchObjective.js";
import { goalVector } from "../../src/metric/goalVector.js";
import { addFactorAdjoint, factorTangent, fromFactor, packedSize, unpack } from "../../src/metric/packedFactor.js";
import { stateTerms } from "../../src/metric/stateTerms.js";
import { trainingState } from "../../src/metric/trainingState.js";
import { type DualMetricFile, dualMetric } from "../../src/nets/dualMetric.js";
import { mlpEvaluator } from "../../src/nets/mlp.js";
import { seededRandom } from "../../src/num/random.js";
import { condition } from "../../src/verify/condition.js";
import { randomModel, randomNetworkMetric } from "../support/randomSystem.js";

const frame = { position: [0, 1], heading: 2, headingHalf: 1.7 } as const;

describe("learner and verifier: two implementations, one truth", () => {
  for (const [n, m, rotation] of [
    [4, 1, undefined],
    [4, 2, frame],
    [6, 2, frame],
  ] as const) {
    it(`agree on C, rate, sigma and density for n=${n}, m=${m}${rotation ? ", body frame" : ""}`, () => {
      const random = seededRandom(100 + n + m);
      const model = randomModel(random, n, m, 3, rotation);
      const file = randomNetworkMetric(random, n, model.active, 8) as Extract<DualMetricFile, { kind: "network" }>;
      const there = condition(model, dualMetric(file));
      const terms = stateTerms(n, m, model.rotation, there.corners);
      const wbar = Float64Array.of(0.1, 0.2, 0.3);
      for (let trial = 0; trial < 200; trial++) {
        const active = Float64Array.from(model.active, () => 2 * random.uniform() - 1);
        there.moveTo(active);
        const state = trainingState(model, file.features, active);
        const { W, tangents } = learnersMetric(file, state, m);
        terms.load(state, W, tangents);
        for (let c = 0; c < there.corners.length; c++) {
          const [ours, theirs] = [terms.conditionMatrix(c, 0.3), there.conditionMatrix(c, 0.3)];
          const size = Math.sqrt(theirs.reduce((s, x) => s + x * x, 0));
          expect(Math.max(...ours.map((x, i) => Math.abs(x - theirs[i]!)))).toBeLessThan(1e-9 * size);
        }
        const push = new Float64Array(wbar.length);
        terms.pushes(wbar, push);
        expect(push.reduce((a, b) => a + b)).toBeCloseTo(there.sigma(wbar), 9);
        // with the gain that the verifier calls the least, the learner's excess is zero; without gain it is the rate
        const rate = there.rate().rate;
        const rho = there.authorityDensity(rate - 0.4) / Math.sqrt(terms.inputGain());
        if (rho > 0) expect(Math.abs(terms.excess(rate - 0.4, rho))).toBeLessThan(1e-7);
        expect(terms.excess(rate - 0.4, 1.01 * rho + 1e-6)).toBeLessThan(0);
        expect(terms.excess(rate + 1e-2, 1e6)).toBeGreaterThan(0);
      }
    });
  }
});

describe("gradient of the batch objective", () => {
  // Batches of one state: there the power mean is the maximum itself.
  it.each([7, 8, 9])("matches central differences in the factor, its tangents and the rate (seed %i)", (seed) => {
    const random = seededRandom(seed);
    const [n, m] = [4, 2];
    const model = randomModel(random, n, m, 2, frame);
    const file = randomNetworkMetric(random, n, model.active, 6) as Extract<DualMetricFile, { kind: "network" }>;
    const { corners } = condition(model, dualMetric(file));
    const terms = stateTerms(n, m, model.rotation, corners);
    const settings = {
      wbar: Float64Array.of(0.2, 0.1),
      window: 0.5,
      authorityLimit: 0.5,
      roomLimit: 1e3,
      activeStates: [1, 3],
      referenceRate: 0.6,
      goalVector: goalVector({ kind: "planar" }, n, model.rotation),
    };
    const states = Array.from({ length: 1 }, () =>
      trainingState(
        model,
        file.features,
        Float64Array.from(model.active, () => 2 * random.uniform() - 1),
      ),
    );
    const size = packedSize(n);
    const parts = states.map((state) => packed(file, state, m));
    const evaluate = (lambda: number) => {
      const members = states.map((state, i): BatchMember => {
        const L = new Float64Array(n * n);
        const W = new Float64Array(n * n);
        unpack(parts[i]!.l, 0, L, n);
        fromFactor(L, file.w0, W, n);
        const dLs = Array.from({ length: m + 1 }, (_, d) => {
          const dL = new Float64Array(n * n);
          unpack(parts[i]!.dl, d * size, dL, n);
          return dL;
        });
        const tangents = dLs.map((dL) => {
          const D = new Float64Array(n * n);
          factorTangent(L, dL, D, n);
          return D;
        });
        const adjoint = { W: new Float64Array(n * n), tangents: tangents.map(() => new Float64Array(n * n)) };
        return { W, load: () => terms.load(state, W, tangents), adjoint };
      });
      return { value: batchObjective(terms, members, lambda, settings), members };
    };
    for (const [lambda, authorityLimit, roomLimit] of [
      [0.4, 0.5, 1e3],
      [2.5, 0.01, 1e3],
      [0.4, 0.5, 1e-3],
    ] as const) {
      settings.authorityLimit = authorityLimit;
      settings.roomLimit = roomLimit;
      const { value, members } = evaluate(lambda);
      const h = 1e-6;
      const up = evaluate(lambda * Math.exp(h)).value.objective;
      const down = evaluate(lambda * Math.exp(-h)).value.objective;
      expect(value.rateSlope).toBeCloseTo((up - down) / (2 * h), 3);
      members.forEach((member, i) => {
        const L = new Float64Array(n * n);
        unpack(parts[i]!.l, 0, L, n);
        const onL = new Float32Array(size);
        const onDl = new Float32Array((m + 1) * size);
        addFactorAdjoint(member.adjoint.W, L, onL, 0, n);
        for (let d = 0; d <= m; d++) {
          const dL = new Float64Array(n * n);
          unpack(parts[i]!.dl, d * size, dL, n);
          addFactorAdjoint(member.adjoint.tangents[d]!, dL, onL, 0, n);
          addFactorAdjoint(member.adjoint.tangents[d]!, L, onDl, d * size, n);
        }
        for (const [array, gradient] of [
          [parts[i]!.l, onL],
          [parts[i]!.dl, onDl],
        ] as const) {
          for (let k = 0; k < array.length; k++) {
            const held = array[k]!;
            array[k] = held + h;
            const above = evaluate(lambda).value.objective;
            array[k] = held - h;
            const below = evaluate(lambda).value.objective;
            array[k] = held;
            const numeric = (above - below) / (2 * h);
            expect(Math.abs(gradient[k]! - numeric)).toBeLessThan(2e-3 * (1 + Math.abs(numeric)));
          }
        }
      });
    }
  });
});

function packed(
  file: Extract<DualMetricFile, { kind: "network" }>,
  state: ReturnType<typeof trainingState>,
  m: number,
) {
  const size = packedSize(file.n);
  const l = new Float64Array(size);
  const dl = new Float64Array((m + 1) * size);
  mlpEvaluator(file.mlp).valueAndTangents(state.features, state.featureTangents, m + 1, l, dl);
  return { l, dl };
}

function learnersMetric(
  file: Extract<DualMetricFile, { kind: "network" }>,
  state: ReturnType<typeof trainingState>,
  m: number,
) {
  const { n } = file;
  const { l, dl } = packed(file, state, m);
  const L = new Float64Array(n * n);
  const W = new Float64Array(n * n);
  unpack(l, 0, L, n);
  fromFactor(L, file.w0, W, n);
  const tangents = Array.from({ length: m + 1 }, (_, d) => {
    const dL = new Float64Array(n * n);
    const D = new Float64Array(n * n);
    unpack(dl, d * packedSize(n), dL, n);
    factorTangent(L, dL, D, n);
    return D;
  });
  return { W, tangents };
}
