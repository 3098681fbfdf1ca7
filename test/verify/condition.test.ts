import { describe, expect, it } from "vitest";
import { seededRandom } from "../../src/num/random.js";
import { condition } from "../../src/verify/condition.js";
import { survey } from "../../src/verify/survey.js";
import { constantMetric, handMetric, handModel, threeStateMetric, threeStateModel } from "../support/handModel.js";

const options = { points: 2048, starts: 6 };

describe("closed forms", () => {
  // Double integrator, W = [[1, -a], [-a, b]]: C = -2 a + 2 lambda, so the rate is a; rho by the Schur complement by hand.
  const [a, b] = [0.7, 1.9];
  const plant = handModel({ n: 2, m: 1, p: 1, f: (z) => [z[1]!, 0], B: () => [[0], [1]], G: () => [[0], [1]] });
  const here = condition(
    plant,
    constantMetric([
      [1, -a],
      [-a, b],
    ]),
  );
  it("gives the rate of a double integrator", () => {
    here.moveTo(Float64Array.of(0.3, -0.2));
    expect(here.rate().rate).toBeCloseTo(a, 12);
  });
  it("gives rho, sigma and the authority density", () => {
    here.moveTo(Float64Array.of(0.3, -0.2));
    const lambda = 0.4;
    const rho = 2 * lambda * b + (b - 2 * lambda * a) ** 2 / (2 * a - 2 * lambda);
    const m22 = 1 / (b - a * a);
    expect(here.authorityDensity(lambda)).toBeCloseTo(rho * Math.sqrt(m22), 10);
    expect(here.sigma(Float64Array.of(0.3))).toBeCloseTo(0.3 * Math.sqrt(m22), 12);
    expect(here.authorityDensity(0.71)).toBe(Number.POSITIVE_INFINITY);
  });
  it("reads a metric that is not positive definite as one that never holds", () => {
    expect(
      condition(
        plant,
        constantMetric([
          [1, 2],
          [2, 1],
        ]),
      ).moveTo(Float64Array.of(0, 0)),
    ).toBe(false);
    expect(
      survey(
        plant,
        constantMetric([
          [1, 2],
          [2, 1],
        ]),
        options,
      ).worst.rate,
    ).toBe(Number.NEGATIVE_INFINITY);
  });
});

describe("declared rotation", () => {
  // A vehicle in the plane with a metric held in the body frame. Without the symmetry the same metric is a function of
  // the heading, differentiated numerically: both must give one condition, at any heading.
  const f = (z: Float64Array): number[] => [
    z[3]! * Math.cos(z[2]!) - 0.2 * Math.sin(z[2]!),
    z[3]! * Math.sin(z[2]!) + 0.2 * Math.cos(z[2]!),
    0.1 * z[3]!,
    -0.3 * z[3]! ** 2,
  ];
  const B = (z: Float64Array): number[][] => [
    [0, 0],
    [0, 0],
    [1 - 0.2 * z[3]!, 0],
    [0, 1.3],
  ];
  const body = (v: number): number[][] => [
    [1 + 0.1 * v, 0.1, 0.05, -0.8],
    [0.1, 1.4, -0.6 * v, 0.1],
    [0.05, -0.6 * v, 2 + v * v, 0],
    [-0.8, 0.1, 0, 3],
  ];
  const turned = (z: Float64Array): number[][] => {
    const [c, s] = [Math.cos(z[2]!), Math.sin(z[2]!)];
    const T = [
      [c, -s, 0, 0],
      [s, c, 0, 0],
      [0, 0, 1, 0],
      [0, 0, 0, 1],
    ];
    const W = body(z[3]!);
    const TW = T.map((row) => W.map((_, j) => row.reduce((sum, t, k) => sum + t * W[k]![j]!, 0)));
    return TW.map((row) => T.map((t) => row.reduce((sum, value, k) => sum + value * t[k]!, 0)));
  };
  it("equals the world-frame condition at every heading", () => {
    const reduced = condition(
      handModel({ n: 4, m: 2, f, B, active: [3], rotation: { position: [0, 1], heading: 2, headingHalf: 1 } }),
      handMetric(4, (z) => body(z[3]!)),
    );
    const world = condition(handModel({ n: 4, m: 2, f, B }), handMetric(4, turned));
    const random = seededRandom(4);
    for (let i = 0; i < 50; i++) {
      const v = 0.5 + random.uniform();
      reduced.moveTo(Float64Array.of(v));
      world.moveTo(Float64Array.of(random.normal(), random.normal(), 3 * random.normal(), v));
      expect(reduced.rate().rate).toBeCloseTo(world.rate().rate, 6);
      const lambda = reduced.rate().rate - 0.3;
      expect(reduced.authorityDensity(lambda) / world.authorityDensity(lambda)).toBeCloseTo(1, 6);
    }
  });
});

describe("published examples", () => {
  // Manchester and Slotine, IEEE TAC 62(5), 2017, 3-state example: dynamics from memory, the rest recomputed. z1 - z2
  // decays at exactly 1 uncontrolled, so no metric has a rate above 1; the box holds the controlled equilibrium 0.
  it("accepts the 3-state example at 0.5 and refuses 1.1", () => {
    const seen = survey(threeStateModel(1.5), threeStateMetric(1.5), options);
    expect(seen.worst.rate).toBeGreaterThan(0.5);
    expect(seen.worst.rate).toBeLessThan(1);
    expect(seen.worst.rate).toBeCloseTo(0.85, 1);
    expect(seen.violations(0.5, 10)).toEqual([]);
    expect(seen.violations(1.1, 10).length).toBe(10);
    expect(seen.authorityDensity(1.1).value).toBe(Number.POSITIVE_INFINITY);
  });

  // Moore-Greitzer compressor, 2 states; trace of the Jacobian -3 phi - 1.5 phi^2 - 1 > 0 between the roots, so every
  // constant metric expands somewhere on (-1.577, -0.423).
  it("refuses every constant metric for the uncontrolled compressor", () => {
    const compressor = handModel({
      n: 2,
      m: 0,
      f: (z) => {
        const phi = -1 + 0.57 * z[0]!;
        return [(-z[1]! - 1.5 * phi * phi - 0.5 * phi ** 3) / 0.57, 3 * phi - z[1]!];
      },
      B: () => [[], []],
    });
    const random = seededRandom(5);
    for (let i = 0; i < 20; i++) {
      const [p, q] = [Math.exp(random.normal()), Math.exp(random.normal())];
      const r = (2 * random.uniform() - 1) * 0.95 * Math.sqrt(p * q);
      expect(
        survey(
          compressor,
          constantMetric([
            [p, r],
            [r, q],
          ]),
          options,
        ).worst.rate,
      ).toBeLessThan(0);
    }
  });
});
