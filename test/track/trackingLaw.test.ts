import { describe, expect, it } from "vitest";
import type { BodyFrame, ControlAffineModel } from "../../src/model/controlAffine.js";
import { dualMetric } from "../../src/nets/dualMetric.js";
import { seededRandom } from "../../src/num/random.js";
import { type NearestInput, nearestInput } from "../../src/track/nearestInput.js";
import { pathFinder } from "../../src/track/shortestPath.js";
import { trackingLaw } from "../../src/track/trackingLaw.js";
import { worldMetric } from "../../src/track/worldMetric.js";
import { constantMetric, handModel, threeStateMetric } from "../support/handModel.js";
import { drivenThreeState, inverseForm, vector } from "./subjects.js";

describe("the nearest input", () => {
  const solve = (excess: number, b: number[], limits: number[], planned: number[]) => {
    const result: NearestInput = { status: "plan", shortfall: 0 };
    const u = new Float64Array(b.length);
    nearestInput(excess, vector(...b), vector(...limits), vector(...planned), u, result);
    return { ...result, u };
  };

  it("is the closed-form projection when no limit is met", () => {
    const { status, u } = solve(0.3, [0.6, -0.8], [1, 1], [0.1, 0.2]);
    expect(status).toBe("corrected");
    expect(u[0]).toBeCloseTo(0.1 - 0.3 * 0.6, 15);
    expect(u[1]).toBeCloseTo(0.2 + 0.3 * 0.8, 15);
  });

  it("is no farther than the best of a fine grid over the box, and meets the inequality whenever the grid can", () => {
    const random = seededRandom(11);
    const seen = new Set<string>();
    for (let trial = 0; trial < 60; trial++) {
      const b = [random.normal(), random.normal()];
      const limits = [0.4 + random.uniform(), 0.4 + random.uniform()];
      const planned = [1.6 * random.uniform() - 0.8, 1.6 * random.uniform() - 0.8];
      const excess = 2 * random.normal();
      const { status, u, shortfall } = solve(excess, b, limits, planned);
      seen.add(status);
      const left = (v: number[]): number => excess + b.reduce((sum, bj, j) => sum + bj * (v[j]! - planned[j]!), 0);
      const cost = (v: number[]): number => v.reduce((sum, vj, j) => sum + ((vj - planned[j]!) / limits[j]!) ** 2, 0);
      const found = [...u];
      for (const value of found) expect(Math.abs(value)).toBeLessThanOrEqual(1 + 1e-12);
      expect(Math.max(0, left(found))).toBeCloseTo(shortfall, 12);
      const steps = 200;
      let [leastLeft, leastCost] = [Number.POSITIVE_INFINITY, Number.POSITIVE_INFINITY];
      for (let i = 0; i <= steps; i++) {
        for (let j = 0; j <= steps; j++) {
          const v = [(2 * i) / steps - 1, (2 * j) / steps - 1];
          leastLeft = Math.min(leastLeft, left(v));
          if (left(v) <= 0) leastCost = Math.min(leastCost, cost(v));
        }
      }
      if (status === "short") expect(leastLeft).toBeGreaterThanOrEqual(shortfall - 1e-12);
      else expect(leastCost).toBeGreaterThanOrEqual(cost(found) - 1e-12);
      if (status !== "short") expect(shortfall).toBe(0);
      if (status === "saturated") expect(Math.max(...found.map(Math.abs))).toBe(1);
      if (status === "plan") expect(found).toEqual(planned);
    }
    expect([...seen].sort()).toEqual(["corrected", "plan", "saturated", "short"]);
  });

  it("says that there is no control direction, and cuts a plan outside the limits", () => {
    expect(solve(0.2, [0, 0], [1, 1], [0.5, 0])).toMatchObject({ status: "noControl", shortfall: 0.2 });
    expect(solve(-0.2, [0, 0], [1, 1], [0.5, 0]).status).toBe("plan");
    const cut = solve(0.1, [1], [1], [1.5]);
    expect(cut).toMatchObject({ status: "saturated", shortfall: 0 });
    expect(cut.u[0]).toBe(1);
  });
});

describe("the tracking law", () => {
  const half = 2;
  const model = drivenThreeState(half, 20);
  const metric = threeStateMetric(half);
  const rate = 0.8;
  const rates = (z: Float64Array, u: number): number[] => {
    const [x1, x2, x3] = [half * z[0]!, half * z[1]!, half * z[2]!];
    return [-x1 + x3, x1 ** 2 - x2 - 2 * x1 * x3 + x3, -x2 + 20 * u].map((value) => value / half);
  };

  it("lowers the energy at the rate asked for: finite differences along the closed loop", () => {
    const random = seededRandom(21);
    const law = trackingLaw(model, metric);
    const seen = new Set<string>();
    for (let trial = 0; trial < 60; trial++) {
      const pick = (): Float64Array => Float64Array.from({ length: 3 }, () => 2 * random.uniform() - 1);
      const plan = pick();
      const z = plan.map((value) => value + 0.3 * random.normal());
      const uPlan = vector(0.2 * random.normal());
      law.reset();
      const { u, status, path, shortfall } = law.step(z, plan, uPlan, rate);
      seen.add(status);
      expect(path.status).toBe("converged");
      expect(shortfall).toBe(0);
      const energyAfter = (h: number): number => {
        const [zRate, planRate] = [rates(z, u[0]!), rates(plan, uPlan[0]!)];
        const moved = (at: Float64Array, by: number[]): Float64Array => at.map((value, i) => value + h * by[i]!);
        return pathFinder(worldMetric(model, metric)).find(moved(plan, planRate), moved(z, zRate)).energy;
      };
      const energy = energyAfter(0);
      const slope = (energyAfter(1e-4) - energyAfter(-1e-4)) / 2e-4;
      expect(slope).toBeLessThanOrEqual(-2 * rate * energy + 1e-4 * (1 + energy));
      // the nearest one: when the plan's input is left, no more than the inequality asks for
      if (status === "corrected") expect(slope).toBeGreaterThanOrEqual(-2 * rate * energy - 1e-4 * (1 + energy));
      else expect(u[0]).toBe(uPlan[0]);
    }
    expect([...seen].sort()).toEqual(["corrected", "plan"]);
  });

  it("with a constant metric, agrees with the inequality written out", () => {
    const W = [
      [2, 0.3],
      [0.3, 1],
    ];
    const linear = handModel({
      n: 2,
      m: 2,
      f: (z) => [z[1]!, 0.5 * z[0]!],
      B: () => [
        [0.2, 1],
        [1, 0],
      ],
    });
    const limits = vector(0.5, 1);
    const { u, status, effort } = trackingLaw(linear, constantMetric(W), { limits }).step(
      vector(0.3, 0.1),
      vector(0.1, 0),
      vector(0.05, -0.1),
      1.5,
    );
    // y = M gap, solved by hand from 2 y1 + 0.3 y2 = 0.2, 0.3 y1 + y2 = 0.1
    const y2 = (2 * 0.1 - 0.3 * 0.2) / (2 - 0.09);
    const y1 = (0.2 - 0.3 * y2) / 2;
    const energy = inverseForm(W, [0.2, 0.1]);
    const excess = y1 * 0.1 + y2 * 0.1 + 1.5 * energy;
    const b = [0.2 * y1 + y2, y1];
    const mu = excess / ((0.5 * b[0]!) ** 2 + b[1]! ** 2);
    expect(status).toBe("corrected");
    expect(u[0]).toBeCloseTo(0.05 - mu * 0.25 * b[0]!, 12);
    expect(u[1]).toBeCloseTo(-0.1 - mu * b[1]!, 12);
    expect(effort).toBeCloseTo(Math.hypot((u[0]! - 0.05) / 0.5, u[1]! + 0.1), 12);
  });

  it("leaves the plan alone on the plan", () => {
    const z = vector(0.4, -0.3, 0.2);
    const { status, u, effort } = trackingLaw(model, metric).step(z, z.slice(), vector(0.1), rate);
    expect([status, u[0], effort]).toEqual(["plan", 0.1, 0]);
  });

  it("reports inputs at their limits and what is left of the inequality", () => {
    const weak = trackingLaw(drivenThreeState(half, 0.5), metric);
    const { status, u, shortfall } = weak.step(vector(0.2, -0.3, 0.9), vector(0.1, -0.1, 0.1), vector(0), rate);
    expect(status).toBe("short");
    expect(Math.abs(u[0]!)).toBe(1);
    expect(shortfall).toBeGreaterThan(0);
  });

  it("says so where no input has any effect", () => {
    const idle = handModel({ n: 2, m: 1, f: (z) => [z[0]!, z[1]!], B: () => [[0], [1]] });
    const metricFlat = constantMetric([
      [1, 0],
      [0, 1],
    ]);
    const { status, shortfall } = trackingLaw(idle, metricFlat).step(vector(0.5, 0), vector(0, 0), vector(0), 1);
    expect(status).toBe("noControl");
    // 1/2 E' = 0.25, lambda E = 0.25
    expect(shortfall).toBeCloseTo(0.5, 12);
  });

  it("gives the plan's input and says so where the metric fails", () => {
    const broken = constantMetric([
      [1, 2],
      [2, 1],
    ]);
    const simple = handModel({ n: 2, m: 1, f: () => [0, 0], B: () => [[0], [1]] });
    const flat = { ...broken, dependsOn: [0] };
    for (const subject of [broken, flat]) {
      const { status, u } = trackingLaw(simple, subject).step(vector(1, 0), vector(0, 0), vector(0.3), 1);
      expect(status).toBe("noMetric");
      expect(u[0]).toBe(0.3);
    }
  });

  it("refuses limits that do not fit", () => {
    expect(() => trackingLaw(model, metric, { limits: vector(1, 1) })).toThrow(/give 1 positive/);
    expect(() => trackingLaw(model, metric, { limits: vector(0) })).toThrow(/limits are \[0\]/);
  });
});

it("a vehicle turned and moved together with its plan gets the same inputs", () => {
  const rotation: BodyFrame = { position: [0, 1], heading: 2, headingHalf: 1.5 };
  const cart: ControlAffineModel = handModel({
    n: 4,
    m: 2,
    active: [3],
    rotation,
    f: (z) => [z[3]! * Math.cos(1.5 * z[2]!), z[3]! * Math.sin(1.5 * z[2]!), 0, -0.2 * z[3]!],
    B: () => [
      [0, 0],
      [0, 0],
      [2, 0],
      [0, 1],
    ],
  });
  const W = [2, 0, 0, -0.4, 0, 1, -0.5, 0, 0, -0.5, 1, 0, -0.4, 0, 0, 1];
  const law = trackingLaw(cart, dualMetric({ kind: "constant", n: 4, W }));
  const step = (angle: number): number[] => {
    const turned = (x: number, y: number, heading: number, speed: number): Float64Array => {
      const [c, s] = [Math.cos(angle), Math.sin(angle)];
      return vector(c * x - s * y + angle, s * x + c * y, heading + angle / 1.5, speed);
    };
    law.reset();
    const { u, status } = law.step(turned(0.1, 0.2, 0.3, 0.6), turned(0, 0, 0.1, 0.5), vector(0.1, 0.05), 0.3);
    expect(status).toBe("corrected");
    return [...u];
  };
  const [first, second] = step(0);
  for (const angle of [0.7, -2, 3]) {
    const [a, b] = step(angle);
    expect(a).toBeCloseTo(first!, 8);
    expect(b).toBeCloseTo(second!, 8);
  }
});
