// The best constant metric against hand results, brute force and metamorphic relations.
import { describe, expect, it } from "vitest";
import { type ConstantMetric, type ConstantMetricRequest, constantMetric } from "../../src/baseline/constantMetric.js";
import { steadyFactor } from "../../src/baseline/constantProblem.js";
import { riccatiAtTrim } from "../../src/baseline/riccatiAtTrim.js";
import { trimPoint } from "../../src/baseline/trim.js";
import type { ControlAffineModel } from "../../src/model/controlAffine.js";
import { dualMetric } from "../../src/nets/dualMetric.js";
import { condition } from "../../src/verify/condition.js";
import { inputCorners } from "../../src/verify/corners.js";
import { scanPoints } from "../../src/verify/scanPoints.js";
import { survey } from "../../src/verify/survey.js";
import { handModel } from "../support/handModel.js";

/** Position and speed, the acceleration is the input and what disturbs. */
const cart = handModel({
  n: 2,
  m: 1,
  p: 1,
  active: [0, 1],
  f: (z) => [z[1]!, 0],
  B: () => [[0], [1]],
  G: () => [[0], [1]],
});
/** The same cart, slipping along: what disturbs is not where the input acts, so a faster tube costs authority. */
const slipping = { ...cart, evaluate: withSlip(cart) };
/** A spring that hardens: the rate that a metric has depends on the state. */
const spring = handModel({
  n: 2,
  m: 1,
  p: 1,
  active: [0, 1],
  f: (z) => [z[1]! - 0.2 * z[0]!, -0.5 * z[0]! ** 3],
  B: () => [[0], [1]],
  G: () => [[0.1], [1]],
});
/** Moore and Greitzer's compressor, two states, over flows between -1.5 and -0.5, nothing actuated. */
const compressor = handModel({
  n: 2,
  m: 0,
  p: 1,
  active: [0, 1],
  f: ([a, b]) => {
    const phi = -1 + 0.5 * a!;
    return [(-b! - 1.5 * phi ** 2 - 0.5 * phi ** 3) / 0.5, 3 * phi - b!];
  },
  B: () => [[], []],
  G: () => [[1], [0]],
});

function withSlip(model: ControlAffineModel): ControlAffineModel["evaluate"] {
  return (z, out) => {
    model.evaluate(z, out);
    out.G.set([1, 0]);
  };
}

const REQUEST: ConstantMetricRequest = {
  wbar: Float64Array.of(0.1),
  window: 0,
  authorityLimit: 0.4,
  goalStates: [0],
  roomLimit: 1e6,
  roomStates: [],
  rate: null,
  rounds: 0,
};

function solve(model: ControlAffineModel, change: Partial<ConstantMetricRequest> = {}, points = 4) {
  const d = model.active.length;
  const flat = scanPoints(d, points);
  const states = Array.from({ length: flat.length / d }, (_, i) => flat.slice(i * d, (i + 1) * d));
  const request = { ...REQUEST, ...change };
  const check = ({ W, rate }: ConstantMetric): Float64Array[] => {
    const seen = survey(model, dualMetric({ kind: "constant", n: model.n, W: Array.from(W) }), {
      points: 256,
      starts: 4,
    });
    return seen.worst.rate < rate ? [seen.worst.at, ...seen.violations(rate, 4).map(({ at }) => at)] : [];
  };
  return constantMetric(model, inputCorners(model.m), states, request, request.rounds > 0 ? check : () => []);
}

function found(...args: Parameters<typeof solve>) {
  const result = solve(...args);
  if (result.status === "infeasible") throw new Error(result.reason);
  return result;
}

/** Margin and authority of W = [[1, -a], [-a, b]] on a cart, by condition.ts; W is scaled so that W_00 = 1. */
function cartTube(
  model: ControlAffineModel,
  a: number,
  b: number,
  rate: number,
  wbar: number,
): { margin: number; authority: number } {
  const here = condition(model, dualMetric({ kind: "constant", n: 2, W: [1, -a, -a, b] }));
  if (!here.moveTo(Float64Array.of(0, 0)) || here.rate().rate <= rate) return { margin: Infinity, authority: Infinity };
  const radius = here.sigma(Float64Array.of(wbar)) / rate;
  return { margin: radius, authority: (radius * here.authorityDensity(rate)) / 2 };
}

describe("the best constant metric", () => {
  it("is that of a brute-force search over all metrics and rates of the cart", () => {
    const best = found(slipping);
    let least = Number.POSITIVE_INFINITY;
    for (let i = 0; i < 60; i++) {
      const rate = 0.2 * 1.06 ** i;
      for (let a = 1.02 * rate; a < 6 * rate; a *= 1.05) {
        for (let b = 1.02 * a * a; b < 40 * a * a; b *= 1.06) {
          const { margin, authority } = cartTube(slipping, a, b, rate, 0.1);
          if (authority <= 0.4) least = Math.min(least, margin);
        }
      }
    }
    // the search is allowed one per cent less of rate and authority
    expect(best.margin).toBeLessThan(1.04 * least);
    expect(best.margin).toBeGreaterThan(0.96 * least);
    expect(best.authority).toBeLessThanOrEqual(0.4);
  });
  it("doubles its margin with the disturbance where the limit allows, and no tighter limit gives a smaller one", () => {
    const [one, two] = [0.05, 0.1].map((wbar) => found(cart, { wbar: Float64Array.of(wbar), rate: 0.5 }));
    const limits = [0.25, 0.3, 0.6].map((authorityLimit) => found(cart, { authorityLimit, rate: 0.5 }).margin);
    expect(limits[0]).toBeGreaterThanOrEqual(limits[1]! * 0.999);
    expect(limits[1]).toBeGreaterThanOrEqual(limits[2]! * 0.999);
    // with half of the disturbance the same limit leaves twice the gain: the margin falls by more than half
    expect(two!.margin / one!.margin).toBeGreaterThanOrEqual(1.99);
    const scaled = found(cart, { wbar: Float64Array.of(0.1), authorityLimit: 0.8, rate: 0.5 });
    const half = found(cart, { wbar: Float64Array.of(0.05), authorityLimit: 0.4, rate: 0.5 });
    expect(scaled.margin / half.margin).toBeCloseTo(2, 2);
  });
  it("takes the window's factor into account", () => {
    const result = found(cart, { window: 0.5 });
    const here = condition(cart, dualMetric({ kind: "constant", n: 2, W: Array.from(result.W) }));
    here.moveTo(Float64Array.of(0, 0));
    const radius = steadyFactor(result.rate, 0.5) * here.sigma(Float64Array.of(0.1));
    expect(result.margin).toBeCloseTo(radius * Math.sqrt(result.W[0]!), 8);
    expect((radius * here.authorityDensity(result.rate)) / 2).toBeLessThanOrEqual(0.4);
  });
  it("leaves plans the room that is asked for, at the price of its margin", () => {
    const free = found(cart, { rate: 0.4 });
    const here = (W: Float64Array): number => {
      const at = condition(cart, dualMetric({ kind: "constant", n: 2, W: Array.from(W) }));
      at.moveTo(Float64Array.of(0, 0));
      return (at.sigma(Float64Array.of(0.1)) / 0.4) * Math.sqrt(W[3]!);
    };
    const taken = here(free.W);
    const roomy = found(cart, { rate: 0.4, roomStates: [1], roomLimit: 0.96 * taken });
    expect(here(roomy.W)).toBeLessThanOrEqual(0.96 * taken * 1.0001);
    expect(roomy.margin).toBeGreaterThan(free.margin);
  });
  it("holds between the samples once cuts are added, and says so when it may add none", () => {
    const held = found(spring, { rounds: 6, wbar: Float64Array.of(0.02) });
    expect(held.status).toBe("found");
    const seen = survey(spring, dualMetric({ kind: "constant", n: 2, W: Array.from(held.W) }), {
      points: 4096,
      starts: 8,
    });
    expect(seen.worst.rate).toBeGreaterThan(held.rate);
    const everywhere = () => [Float64Array.of(0.3, 0.3)];
    const states = [Float64Array.of(0, 0)];
    const request = { ...REQUEST, wbar: Float64Array.of(0.02) };
    const stuck = constantMetric(spring, inputCorners(1), states, request, everywhere);
    expect(stuck.status).toBe("violated");
  });
  it("refuses the compressor: the trace of its Jacobian is positive for flows from -1.577 to -0.423", () => {
    const result = solve(compressor, {}, 16);
    expect(result.status).toBe("infeasible");
    if (result.status === "infeasible") {
      expect(result.reason).toMatch(/no constant metric contracts/);
      expect(result.leastAuthority).toBeNull();
    }
  });
  it("names the least authority when the limit is too tight", () => {
    const result = solve(cart, { authorityLimit: 0.01 });
    if (result.status !== "infeasible") throw new Error(result.status);
    // the disturbance acts where the input does: it takes at least as much to stand against it
    expect(result.leastAuthority!.authority).toBeGreaterThan(0.1);
    expect(result.reason).toMatch(/over the limit of 1\.00 %/);
  });
  it.each([
    [{ wbar: Float64Array.of(-1) }, /disturbance bounds/],
    [{ window: -1 }, /window -1/],
    [{ authorityLimit: 0 }, /authority limit 0/],
    [{ rate: 0 }, /rate 0/],
    [{ goalStates: [2] }, /indices from 0 to 1/],
  ])("refuses misuse %#", (change, message) => {
    expect(() => solve(cart, change)).toThrow(message);
  });
});

describe("Riccati designs at trim", () => {
  it("find the inputs that hold the middle of the envelope, within their range", () => {
    const pushed = handModel({
      n: 2,
      m: 1,
      p: 1,
      active: [0, 1],
      f: (z) => [z[1]!, -0.3 - z[0]!],
      B: () => [[0], [0.5]],
      G: () => [[0], [1]],
    });
    const trim = trimPoint(pushed);
    expect(trim.inputs[0]).toBeCloseTo(0.6, 12);
    expect(trim.residualRate).toBeCloseTo(0, 12);
    const strong = handModel({ n: 1, m: 1, p: 1, active: [0], f: () => [-3], B: () => [[1]], G: () => [[1]] });
    expect(trimPoint(strong).inputs[0]).toBe(1);
    expect(trimPoint(strong).residualRate).toBeCloseTo(2, 12);
  });
  it("contract a linear plant faster than they prescribe", () => {
    const designs = riccatiAtTrim(cart);
    expect(designs.length).toBe(10);
    for (const { W, shift } of designs) {
      const here = condition(cart, dualMetric({ kind: "constant", n: 2, W: Array.from(W) }));
      here.moveTo(Float64Array.of(0, 0));
      expect(here.rate().rate).toBeGreaterThan(shift);
    }
  });
  it("are never better than the best constant metric at the same limit", () => {
    const best = found(cart, { rate: 0.3 });
    for (const { W } of riccatiAtTrim(cart)) {
      const scaled = Array.from(W, (value) => value / W[0]!);
      const { margin, authority } = cartTube(cart, -scaled[1]!, scaled[3]!, 0.3, 0.1);
      if (authority <= 0.396) expect(best.margin).toBeLessThan(1.003 * margin);
    }
  });
});
