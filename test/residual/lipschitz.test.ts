// Bounds of slopes against brute force over the envelope, and where they are known to be exact.
import { describe, expect, it } from "vitest";
import { initialMlp } from "../../src/engine/trainableMlp.js";
import type { ResidualTerm } from "../../src/model/controlAffine.js";
import { type Feature, featureSlope, featureValue } from "../../src/nets/features.js";
import { mlpEvaluator } from "../../src/nets/mlp.js";
import { type Random, seededRandom } from "../../src/num/random.js";
import { termSlopes } from "../../src/residual/lipschitz.js";

const value = (state: number, half: number): Feature => ({ state, map: "value", center: 1, half });
const angle = (state: number, half: number): Feature[] =>
  (["sin", "cos"] as const).map((map) => ({ state, map, center: 0.2, half }));

/** Largest length of the gradient in the scaled states, and largest slope along each, over random points. */
function bruteForce({ features, mlp, outputScale }: ResidualTerm, states: readonly number[], random: Random) {
  const net = mlpEvaluator(mlp);
  const count = features.length;
  const identity = Float64Array.from({ length: count * count }, (_, i) => (i % (count + 1) === 0 ? 1 : 0));
  const [out, gradient] = [new Float64Array(1), new Float64Array(count)];
  let all = 0;
  const each = states.map(() => 0);
  for (let trial = 0; trial < 4000; trial++) {
    const z = states.map(() => 2 * random.uniform() - 1);
    const zOf = (feature: Feature): number => z[states.indexOf(feature.state)]!;
    net.valueAndTangents(
      Float64Array.from(features, (feature) => featureValue(feature, zOf(feature))),
      identity,
      count,
      out,
      gradient,
    );
    const slopes = states.map((state) =>
      features.reduce(
        (sum, feature, f) =>
          feature.state === state ? sum + outputScale * gradient[f]! * featureSlope(feature, zOf(feature)) : sum,
        0,
      ),
    );
    all = Math.max(all, Math.hypot(...slopes));
    for (const [i, slope] of slopes.entries()) each[i] = Math.max(each[i]!, Math.abs(slope));
  }
  return { all, each };
}

describe("the steepest slope of a fitted term", () => {
  it.each([1, 2, 3, 4, 5, 6])("is no less than brute force finds (seed %i)", (seed) => {
    const random = seededRandom(seed);
    const features = [value(3, 2), ...angle(1, 1.3), value(0, 0.25)];
    const mlp = initialMlp([features.length, 9, 9, 1], random, 1.5);
    const term = { state: 0, input: null, features, mlp, outputScale: -0.7 };
    const slopes = termSlopes(term);
    const found = bruteForce(term, [3, 1, 0], random);
    expect(slopes.scaled).toBeGreaterThanOrEqual(found.all);
    expect(slopes.states.map(({ state }) => state)).toEqual([3, 1, 0]);
    for (const [i, { scaled, si }] of slopes.states.entries()) {
      expect(scaled).toBeGreaterThanOrEqual(found.each[i]!);
      expect(si).toBeCloseTo(scaled / [2, 1.3, 0.25][i]!, 12);
      expect(scaled).toBeLessThanOrEqual(slopes.scaled * (1 + 1e-12));
    }
    // and it is no wild guess: these networks keep within a few times their bound
    expect(slopes.scaled).toBeLessThan(30 * found.all);
  });

  it("is exact for one linear layer: the length of its weights", () => {
    const mlp = { layers: [{ weights: [[3, -4]], bias: [0.5] }] };
    const { scaled, states } = termSlopes({
      state: 0,
      input: null,
      features: [value(0, 2), value(1, 0.5)],
      mlp,
      outputScale: -0.1,
    });
    expect(scaled).toBeCloseTo(0.5, 14);
    expect(states[0]!.scaled).toBeCloseTo(0.3, 14);
    expect(states[0]!.si).toBeCloseTo(0.15, 14);
    expect(states[1]!.scaled).toBeCloseTo(0.4, 14);
    expect(states[1]!.si).toBeCloseTo(0.8, 14);
  });

  it("is reached at the steepest point of one tanh unit, and on an angle's circle", () => {
    // 2 tanh(3 z) has slope 6 at z = 0
    const steep = {
      layers: [
        { weights: [[3]], bias: [0] },
        { weights: [[2]], bias: [1] },
      ],
    };
    const term = { state: 0, input: null, features: [value(0, 4)], mlp: steep, outputScale: 1 };
    expect(termSlopes(term).scaled).toBeCloseTo(6, 13);
    expect(termSlopes(term).states[0]!.si).toBeCloseTo(1.5, 13);
    // 0.6 sin a + 0.8 cos a is a sine of size 1: its steepest slope per scaled angle is the half-range
    const circle = { layers: [{ weights: [[0.6, 0.8]], bias: [0] }] };
    const turning = { state: 0, input: 0, features: angle(2, Math.PI), mlp: circle, outputScale: 1 };
    expect(termSlopes(turning).scaled).toBeCloseTo(Math.PI, 13);
    expect(termSlopes(turning).states).toHaveLength(1);
    expect(termSlopes(turning).states[0]!.si).toBeCloseTo(1, 13);
    expect(bruteForce(turning, [2], seededRandom(9)).all).toBeGreaterThan(Math.PI * 0.999);
  });
});
