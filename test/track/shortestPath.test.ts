import { describe, expect, it } from "vitest";
import type { BodyFrame } from "../../src/model/controlAffine.js";
import { dualMetric } from "../../src/nets/dualMetric.js";
import { seededRandom } from "../../src/num/random.js";
import { chebyshev } from "../../src/track/chebyshev.js";
import { pathEnergy } from "../../src/track/pathEnergy.js";
import { PATH_SETTINGS, pathFinder } from "../../src/track/shortestPath.js";
import { worldMetric } from "../../src/track/worldMetric.js";
import { constantMetric, handMetric, threeStateMetric } from "../support/handModel.js";
import { randomNetworkMetric } from "../support/randomSystem.js";
import { FLAT, inverseForm, restricted, shape, threeStateEnergy, vector } from "./subjects.js";

const sharp = { ...PATH_SETTINGS, tolerance: 1e-7 };

describe("constant metric", () => {
  it("goes straight, at the closed-form energy", () => {
    const metric = worldMetric(shape(3), dualMetric({ kind: "constant", n: 3, W: FLAT.flat() }));
    expect(metric.varying).toEqual([]);
    const path = pathFinder(metric).find(vector(0.1, -0.2, 0.3), vector(0.4, 0.5, -0.6));
    const gap = [0.3, 0.7, -0.9];
    expect(path.status).toBe("converged");
    expect(path.iterations).toBe(0);
    expect(path.energy).toBeCloseTo(inverseForm(FLAT, gap), 13);
    gap.forEach((value, i) => {
      expect(path.tangentStart[i]).toBeCloseTo(value, 13);
      expect(path.tangentEnd[i]).toBeCloseTo(value, 13);
    });
  });

  it("is a straight line at once too when the metric is not known to be constant", () => {
    const path = pathFinder(worldMetric(shape(3), constantMetric(FLAT))).find(vector(0, 0, 0), vector(0.4, 0.5, -0.6));
    expect(path.iterations).toBe(0);
    expect(path.energy).toBeCloseTo(inverseForm(FLAT, [0.4, 0.5, -0.6]), 12);
  });

  it("has no length between equal states", () => {
    const path = pathFinder(worldMetric(shape(3), threeStateMetric(2))).find(vector(1, 0, 1), vector(1, 0, 1));
    expect(path).toMatchObject({ status: "converged", energy: 0, residual: 0 });
  });
});

describe("the 3-state example: straight in (x1, x2 + x1^2, x3), so a parabola", () => {
  it("finds the closed-form distance and end tangents", () => {
    const random = seededRandom(3);
    for (const half of [1, 2]) {
      const finder = pathFinder(worldMetric(shape(3), restricted(threeStateMetric(half), [0])), sharp);
      for (let trial = 0; trial < 20; trial++) {
        const pick = (): Float64Array => Float64Array.from({ length: 3 }, () => 2 * random.uniform() - 1);
        const [from, to] = [pick(), pick()];
        finder.reset();
        const path = finder.find(from, to);
        expect(path.status).toBe("converged");
        const truth = threeStateEnergy(half, from, to);
        expect(Math.abs(path.energy / truth - 1)).toBeLessThan(1e-12);
        // x1 = straight, x2 = z2 - half x1^2 in scaled states
        const gap1 = to[0]! - from[0]!;
        const gapFlat = to[1]! + half * to[0]! ** 2 - from[1]! - half * from[0]! ** 2;
        expect(path.tangentEnd[0]).toBeCloseTo(gap1, 6);
        expect(path.tangentEnd[1]).toBeCloseTo(gapFlat - 2 * half * to[0]! * gap1, 6);
        expect(path.tangentStart[1]).toBeCloseTo(gapFlat - 2 * half * from[0]! * gap1, 6);
        expect(path.tangentEnd[2]).toBeCloseTo(to[2]! - from[2]!, 6);
        expect(path.speedError).toBeLessThan(1e-6);
        expect(path.endGain).toBeCloseTo(1, 6);
      }
    }
  });

  it("finds the same without the reduction", () => {
    const [from, to] = [vector(0.9, -0.3, 0.2), vector(-0.7, 0.4, 0.6)];
    const path = pathFinder(worldMetric(shape(3), threeStateMetric(1)), sharp).find(from, to);
    expect(path.status).toBe("converged");
    expect(Math.abs(path.energy / threeStateEnergy(1, from, to) - 1)).toBeLessThan(1e-12);
  });

  it("an unfinished path is reported and is no shorter than the shortest", () => {
    const settings = { ...PATH_SETTINGS, maxIterations: 1 };
    const [from, to] = [vector(1, -0.5, 0), vector(-0.6, 1, 0.4)];
    const path = pathFinder(worldMetric(shape(3), threeStateMetric(2)), settings).find(from, to);
    expect(path.status).toBe("notConverged");
    expect(path.residual).toBeGreaterThan(PATH_SETTINGS.tolerance);
    expect(path.energy).toBeGreaterThan(threeStateEnergy(2, from, to) * 1.0001);
  });
});

describe("curved metrics", () => {
  /** Half-plane of constant curvature -1 (Poincare): W = y^2 I, d = arcosh(1 + |gap|^2 / (2 y1 y2)). */
  const halfPlane = handMetric(2, (z) => [
    [z[1]! ** 2, 0],
    [0, z[1]! ** 2],
  ]);
  const [from, to] = [vector(-0.4, 1.1), vector(0.5, 0.8)];
  const truth = Math.acosh(1 + (0.9 ** 2 + 0.3 ** 2) / (2 * 1.1 * 0.8)) ** 2;

  it("converges to the closed form with the degree, the cyclic state eliminated or not", () => {
    for (const dependsOn of [[1], [0, 1]]) {
      const errors = [3, 4, 6, 8, 10].map((degree) => {
        const metric = worldMetric(shape(2), restricted(halfPlane, dependsOn));
        const path = pathFinder(metric, { ...sharp, degree }).find(from, to);
        expect(path.status).toBe("converged");
        return Math.abs(path.energy / truth - 1);
      });
      for (let k = 1; k < errors.length; k++) expect(errors[k]).toBeLessThan(errors[k - 1]!);
      expect(errors[1]).toBeLessThan(1e-3);
      expect(errors[4]).toBeLessThan(1e-7);
    }
  });

  it("a distance is the same from either end, and shorter than the straight line", () => {
    const metric = worldMetric(shape(2), halfPlane);
    const forth = pathFinder(metric, sharp).find(from, to).energy;
    const back = pathFinder(metric, sharp).find(to, from).energy;
    expect(forth / back).toBeCloseTo(1, 10);
    const fine = 2000;
    let straight = 0;
    for (let k = 0; k < fine; k++) straight += (0.9 ** 2 + 0.3 ** 2) / (1.1 - (0.3 * (k + 0.5)) / fine) ** 2 / fine;
    expect(forth).toBeLessThan(straight);
  });

  it("the end momenta are half the derivatives of the closed-form energy (first variation)", () => {
    const energy = (a: Float64Array, b: Float64Array): number =>
      Math.acosh(1 + ((b[0]! - a[0]!) ** 2 + (b[1]! - a[1]!) ** 2) / (2 * a[1]! * b[1]!)) ** 2;
    const h = 1e-5;
    for (const [degree, digits] of [
      [4, 3],
      [8, 6],
    ] as const) {
      const path = pathFinder(worldMetric(shape(2), halfPlane), { ...sharp, degree }).find(from, to);
      for (let i = 0; i < 2; i++) {
        const moved = (z: Float64Array, sign: number): Float64Array => z.map((v, k) => (k === i ? v + sign * h : v));
        const end = (energy(from, moved(to, 1)) - energy(from, moved(to, -1))) / (2 * h);
        const start = (energy(moved(from, 1), to) - energy(moved(from, -1), to)) / (2 * h);
        expect(path.momentumEnd[i]).toBeCloseTo(end / 2, digits);
        expect(path.momentumStart[i]).toBeCloseTo(-start / 2, digits);
      }
      // M x_s, from the polynomial itself, is the same but far less exact
      expect(path.tangentEnd[0]! / 0.8 ** 2).toBeCloseTo(path.momentumEnd[0]!, 2);
    }
  });

  it("with the bend held, the slopes of the path's own energy are its end momenta even far from the shortest", () => {
    const path = pathEnergy(worldMetric(shape(2), halfPlane), chebyshev(4));
    const { points } = chebyshev(4);
    const bend = vector(0.5, 0.3, -0.2, 0.2, 0.4, -0.1);
    const spare = new Float64Array(6);
    const energy = (a: Float64Array, b: Float64Array): number => {
      path.setEnds(a, b);
      return path.evaluate(
        bend.map((value, at) => value + points[1 + Math.floor(at / 2)]! * (b[at % 2]! - a[at % 2]!)),
        spare,
      );
    };
    energy(from, to);
    const [start, end] = [new Float64Array(2), new Float64Array(2)];
    path.endSlopes(start, end);
    const h = 1e-6;
    for (let i = 0; i < 2; i++) {
      const moved = (z: Float64Array, sign: number): Float64Array => z.map((v, k) => (k === i ? v + sign * h : v));
      expect(2 * end[i]!).toBeCloseTo((energy(from, moved(to, 1)) - energy(from, moved(to, -1))) / (2 * h), 6);
      expect(2 * start[i]!).toBeCloseTo((energy(moved(from, 1), to) - energy(moved(from, -1), to)) / (2 * h), 6);
    }
  });

  it("reports a metric that is not positive definite on the way", () => {
    const metric = worldMetric(
      shape(1),
      handMetric(1, (z) => [[z[0]! ** 2 - 0.25]]),
    );
    expect(pathFinder(metric).find(vector(-1), vector(1)).status).toBe("notPositive");
    expect(pathFinder(metric).find(vector(0.6), vector(1)).status).toBe("converged");
  });
});

describe("gradient and warm start", () => {
  const frame: BodyFrame = { position: [0, 1], heading: 2, headingHalf: 0.8 };
  const network = dualMetric(randomNetworkMetric(seededRandom(5), 5, [3, 4], 16));

  for (const rotation of [undefined, frame]) {
    it(`the energy's gradient agrees with finite differences ${rotation ? "with" : "without"} a rotation`, () => {
      const metric = worldMetric(shape(5, rotation, 0.3), network);
      expect(metric.varying).toEqual(rotation ? [2, 3, 4] : [3, 4]);
      const path = pathEnergy(metric, chebyshev(4));
      const random = seededRandom(8);
      expect(path.setEnds(vector(0.1, 0.2, -0.5, 0.3, -0.4), vector(-0.3, 0.5, 0.6, -0.2, 0.5))).toBe(true);
      const inner = Float64Array.from({ length: path.unknowns }, () => 0.5 * random.normal());
      const gradient = new Float64Array(path.unknowns);
      const spare = new Float64Array(path.unknowns);
      path.evaluate(inner, gradient);
      const h = 1e-6;
      inner.forEach((_, at) => {
        const energy = (sign: number): number =>
          path.evaluate(
            inner.map((v, k) => (k === at ? v + sign * h : v)),
            spare,
          );
        const slope = (energy(1) - energy(-1)) / (2 * h);
        expect(Math.abs(gradient[at]! - slope)).toBeLessThan(1e-6 * (1 + Math.abs(slope)));
      });
    });
  }

  it("along a run the path kept from before leads to the same result as a fresh start, in fewer steps", () => {
    const metric = worldMetric(shape(5, frame), network);
    const [warm, fresh] = [pathFinder(metric, sharp), pathFinder(metric, sharp)];
    let [warmSteps, freshSteps] = [0, 0];
    for (let k = 0; k < 200; k++) {
      const at = (shift: number): Float64Array =>
        vector(...[1, 2, 3, 4, 5].map((i) => 0.6 * Math.sin(0.01 * k * i + shift)));
      const [from, to] = [at(0), at(0.4)];
      fresh.reset();
      const [a, b] = [warm.find(from, to), fresh.find(from, to)];
      expect(a.status).toBe("converged");
      expect(Math.abs(a.energy / b.energy - 1)).toBeLessThan(1e-12);
      for (let i = 0; i < 5; i++) expect(Math.abs(a.momentumEnd[i]! - b.momentumEnd[i]!)).toBeLessThan(1e-6);
      warmSteps += a.iterations;
      freshSteps += b.iterations;
    }
    expect(warmSteps).toBeLessThan(freshSteps);
  });
});

describe("planar rotation", () => {
  const body = [
    [1, 0.1, 0.2, 0],
    [0.1, 0.4, 0.3, 0.1],
    [0.2, 0.3, 0.7, 0],
    [0, 0.1, 0, 0.5],
  ];
  const headingHalf = 1.2;
  const headingZero = -0.25;
  const rotation: BodyFrame = { position: [0, 1], heading: 2, headingHalf };
  const declared = worldMetric(shape(4, rotation, headingZero), dualMetric({ kind: "constant", n: 4, W: body.flat() }));
  const from = vector(0.1, -0.2, 0.1, 0.3);
  const to = vector(0.7, 0.5, 0.9, -0.1);

  /** T(psi) What T(psi)^T written out, no rotation declared. */
  const spelledOut = handMetric(4, (z) => {
    const psi = headingHalf * (z[2]! - headingZero);
    const [c, s] = [Math.cos(psi), Math.sin(psi)];
    const T = [
      [c, -s, 0, 0],
      [s, c, 0, 0],
      [0, 0, 1, 0],
      [0, 0, 0, 1],
    ];
    const times = (a: number[][], b: number[][]): number[][] =>
      a.map((row) => b[0]!.map((_, j) => row.reduce((sum, v, k) => sum + v * b[k]![j]!, 0)));
    return times(
      times(T, body),
      T[0]!.map((_, j) => T.map((row) => row[j]!)),
    );
  });

  it("agrees with the metric written out in world coordinates, and is not straight", () => {
    const path = pathFinder(declared, { ...sharp, degree: 10 }).find(from, to);
    const other = pathFinder(worldMetric(shape(4), restricted(spelledOut, [2])), { ...sharp, degree: 10 }).find(
      from,
      to,
    );
    const full = pathFinder(worldMetric(shape(4), spelledOut), { ...sharp, degree: 10 }).find(from, to);
    expect(path.status).toBe("converged");
    expect(other.energy / path.energy).toBeCloseTo(1, 10);
    expect(full.energy / path.energy).toBeCloseTo(1, 5);
    for (let i = 0; i < 4; i++) expect(full.tangentEnd[i]).toBeCloseTo(path.tangentEnd[i]!, 3);
    expect(Math.hypot(...path.tangentEnd.map((v, i) => v - path.tangentStart[i]!))).toBeGreaterThan(0.05);
  });

  it("does not change when both states are turned and moved together", () => {
    const turned = (z: Float64Array, angle: number): Float64Array => {
      const [c, s] = [Math.cos(angle), Math.sin(angle)];
      return vector(c * z[0]! - s * z[1]! + 3, s * z[0]! + c * z[1]! - 2, z[2]! + angle / headingHalf, z[3]!);
    };
    const finder = pathFinder(declared, sharp);
    const path = finder.find(from, to);
    const energy = path.energy;
    const end = path.tangentEnd.slice();
    for (const angle of [0.5, -1.3, 2.9]) {
      const { energy: again, tangentEnd } = finder.find(turned(from, angle), turned(to, angle));
      expect(again / energy).toBeCloseTo(1, 11);
      const [c, s] = [Math.cos(angle), Math.sin(angle)];
      expect(tangentEnd[0]).toBeCloseTo(c * end[0]! - s * end[1]!, 6);
      expect(tangentEnd[1]).toBeCloseTo(s * end[0]! + c * end[1]!, 6);
    }
  });
});

it("refuses a metric of another model", () => {
  expect(() => worldMetric(shape(4), constantMetric(FLAT))).toThrow(/3 states and the model 4/);
});
