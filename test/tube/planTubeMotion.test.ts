import { describe, expect, it } from "vitest";
import type { Piece } from "../../src/logs/recording.js";
import type { Scaling } from "../../src/plant/scaling.js";
import { MOTION_LIMIT, motionProblem, rangeProblems } from "../../src/tube/planChecks.js";
import { planMotion } from "../../src/tube/planSteps.js";
import { constantMetric, handModel } from "../support/handModel.js";
import { handPlant } from "../verify/proofPlants.js";

const scaling = (n: number, m: number): Scaling => ({
  stateCenter: new Float64Array(n),
  stateHalf: new Float64Array(n).fill(1),
  inputCenter: new Float64Array(m),
  inputHalf: new Float64Array(m).fill(1),
});

/** Rows of [time, states.., inputs..]. */
function piece(rows: readonly (readonly number[])[], n: number): Piece {
  return {
    time: Float64Array.from(rows, ([time]) => time!),
    states: Float64Array.from(rows.flatMap((row) => row.slice(1, 1 + n))),
    inputs: Float64Array.from(rows.flatMap((row) => row.slice(1 + n))),
  };
}

// x'' = v by hand: x + h x' + h^2/2 v, x' + h v
const integrator = handModel({ n: 2, m: 1, f: (z) => [z[1]!, 0], B: () => [[0], [1]] });
const W = [
  [0.25, 0.1],
  [0.1, 1],
];
const metric = constantMetric(W);

function integratorPlan(count: number, h: number, v: (k: number) => number, error = 0): Piece {
  const rows: number[][] = [];
  let [x, s] = [-0.4, 0];
  for (let k = 0; k < count; k++) {
    rows.push([2 + k * h, x + (k === 7 ? error : 0), s, v(k)]);
    x += h * s + (h * h * v(k)) / 2;
    s += h * v(k);
  }
  return piece(rows, 2);
}

describe("a plan's motion on the model", () => {
  it("does not jump when it is one, and keeps the planned state in every step's box", () => {
    const [h, v] = [0.2, (k: number): number => Math.sin(k)];
    const plan = integratorPlan(20, h, v);
    const { steps, jumps, sampleOf } = planMotion(integrator, metric, scaling(2, 1), plan, 0.8);
    expect(Math.max(...jumps)).toBeLessThan(1e-14);
    expect(steps).toHaveLength(19 * 4);
    for (const [k, { start, end, lower, upper, inputs }] of steps.entries()) {
      const sample = sampleOf[k]!;
      expect(inputs[0]).toBe(v(sample));
      for (const share of [0, 0.3, 0.5, 0.9, 1]) {
        const t = (start + share * (end - start)) * 1e-9 - sample * h;
        const [x, s] = [plan.states[2 * sample]!, plan.states[2 * sample + 1]!];
        const at = [x + t * s + (t * t * v(sample)) / 2, s + t * v(sample)];
        for (const [i, value] of at.entries()) {
          expect(value).toBeGreaterThanOrEqual(lower[i]! - 1e-15);
          expect(value).toBeLessThanOrEqual(upper[i]! + 1e-15);
        }
      }
    }
    expect(steps.at(-1)!.end).toBe(19 * 0.2e9);
  });

  it("follows a bent motion inside the box of a long step", () => {
    // x' = y, y' = -x: the unit circle, one step of half a radian around its top
    const turning = handModel({ n: 2, m: 0, f: (z) => [4 * z[1]!, -4 * z[0]!], B: () => [[], []] });
    const at = (t: number): number[] => [0.8 * Math.sin(4 * t - 0.5), 0.8 * Math.cos(4 * t - 0.5)];
    const rows = [0, 0.25].map((t) => [t, ...at(t)]);
    const { steps } = planMotion(turning, metric, scaling(2, 0), piece(rows, 2), 4);
    expect(steps).toHaveLength(1);
    expect(steps[0]!.upper[1]).toBeGreaterThanOrEqual(0.8);
  });

  it("jumps by sqrt(e^T W^-1 e) where a sample is off", () => {
    const error = 0.01;
    const { jumps, defects, steps, sampleOf } = planMotion(
      integrator,
      metric,
      scaling(2, 1),
      integratorPlan(20, 0.1, () => 0.2, error),
      0.8,
    );
    const determinant = 0.25 - 0.01;
    // there and back again
    for (const k of [7, 8]) expect(jumps[k]! / 1.01).toBeCloseTo(error * Math.sqrt(1 / determinant), 12);
    expect(defects[7 * 2]).toBeCloseTo(error, 12);
    expect(defects[8 * 2]).toBeCloseTo(-error, 12);
    const jumping = steps.flatMap(({ jump }, k) => (jump > 1e-12 ? [sampleOf[k]] : []));
    expect(jumping).toEqual([7, 8]);
  });

  it("measures a jump in the body frame of a turned plan", () => {
    // a car of speed 1: the same plan turned by any angle jumps by the same lengths
    const car = handModel({
      n: 3,
      m: 1,
      f: (z) => [Math.cos(z[2]!), Math.sin(z[2]!), 0],
      B: () => [[0], [0], [1]],
      active: [],
      rotation: { position: [0, 1], heading: 2, headingHalf: 1 },
    });
    const body = constantMetric([
      [0.04, 0, 0],
      [0, 1, 0],
      [0, 0, 0.5],
    ]);
    const jumpsAt = (angle: number): number[] => {
      const [c, s] = [Math.cos(angle), Math.sin(angle)];
      const rows = Array.from({ length: 12 }, (_, k) => {
        const [x, y] = [0.1 * k + (k === 5 ? 0.01 : 0), k === 9 ? 0.01 : 0];
        return [0.1 * k, c * x - s * y, s * x + c * y, angle, 0];
      });
      return Array.from(planMotion(car, body, scaling(3, 1), piece(rows, 3), 0).jumps);
    };
    const straight = jumpsAt(0);
    expect(straight[5]! / 1.01).toBeCloseTo(0.01 / 0.2, 12);
    expect(straight[9]! / 1.01).toBeCloseTo(0.01 / 1, 12);
    for (const angle of [0.7, -2.5, 7])
      for (const [k, jump] of jumpsAt(angle).entries()) expect(jump).toBeCloseTo(straight[k]!, 11);
  });
});

describe("checks of a plan", () => {
  const plant = handPlant({
    states: { place: [-1, 1], speed: [-1, 1] },
    inputs: { push: [-1, 1] },
    f: ["speed", "0"],
    B: [["0"], ["1"]],
  });

  it("names the first state and input out of range, with time and value", () => {
    const plan = integratorPlan(40, 0.1, (k) => (k === 20 ? 1.5 : 0.8));
    const problems = rangeProblems(plant, plan);
    expect(problems.map(({ kind, name }) => [kind, name])).toEqual([
      ["state", "place"],
      ["state", "speed"],
      ["input", "push"],
    ]);
    const first = Array.from(plan.time.keys()).find((k) => Math.abs(plan.states[2 * k + 1]!) > 1)!;
    expect(problems[1]).toMatchObject({ row: first + 1, time: plan.time[first], value: plan.states[2 * first + 1] });
    expect(problems[2]).toMatchObject({ row: 21, value: 1.5, allowed: [-1, 1] });
    expect(problems[2]!.text).toBe("push is 1.5 at 4 s (row 21); the certificate covers -1 to 1");
    const low = { ...plan, inputs: plan.inputs.map((value, k) => (k === 3 ? -1.01 : value / 2)) };
    expect(rangeProblems(plant, low).at(-1)).toMatchObject({ kind: "input", row: 4, value: -1.01 });
    expect(
      rangeProblems(
        plant,
        integratorPlan(20, 0.1, () => 0.1),
      ),
    ).toEqual([]);
  });

  it("counts the jumps of a window against the disturbance and names the worst", () => {
    const [window, sigma] = [0.8, 0.1];
    const shareOf = (error: number, count = 20) => {
      const plan = integratorPlan(count, 0.1, () => 0.2, error);
      return motionProblem(plant, plan, planMotion(integrator, metric, scaling(2, 1), plan, window), window, sigma);
    };
    const length = 1.01 * 0.01 * Math.sqrt(1 / 0.24);
    expect(shareOf(0.01).share).toBeCloseTo((2 * length) / (window * sigma), 8);
    expect(shareOf(0.01).problem!.kind).toBe("motion");
    const limit = (0.01 * MOTION_LIMIT) / shareOf(0.01).share;
    expect(shareOf(0.99 * limit).problem).toBeNull();
    const { problem } = shareOf(0.02);
    expect(problem).toMatchObject({ name: "place", row: 8 });
    expect(problem!.time).toBeCloseTo(2.7, 12);
    expect(problem!.value).toBeCloseTo(0.02, 12);
    expect(problem!.text).toMatch(/place at 2\.7 s \(row 8\) is 0\.02 beyond/);
  });

  it("finds a plan for another model out", () => {
    // the same table read with a push of the other sign
    const plan = integratorPlan(20, 0.1, (k) => Math.cos(k));
    const turned = { ...plan, inputs: plan.inputs.map((value) => -value) };
    const motion = planMotion(integrator, metric, scaling(2, 1), turned, 0.8);
    expect(motionProblem(plant, turned, motion, 0.8, 0.1).problem!.name).toBe("speed");
  });
});
