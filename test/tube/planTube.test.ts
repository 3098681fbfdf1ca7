import { describe, expect, it } from "vitest";
import { seededRandom } from "../../src/num/random.js";
import { type LocalBounds, type PlanStep, planTube } from "../../src/tube/planTube.js";
import { radiusAt, steadyRadius } from "../../src/tube/tube.js";

/** Steps of equal length (s) around a planned coordinate. */
function planOf(seconds: number, step: number, at: (time: number) => number, jump = 0): PlanStep[] {
  const ns = Math.round(step * 1e9);
  return Array.from({ length: Math.round(seconds / step) }, (_, k) => {
    const ends = [at(k * step), at((k + 1) * step)];
    return {
      start: k * ns,
      end: (k + 1) * ns,
      lower: Float64Array.of(Math.min(...ends)),
      upper: Float64Array.of(Math.max(...ends)),
      inputs: Float64Array.of(0),
      jump: k === 0 ? 0 : jump,
    };
  });
}

const bounds = (pushes: readonly number[], width = 0.25, authority = 0.5): LocalBounds => ({
  rate: 2,
  pushes,
  widths: [width],
  spreads: [width],
  authority,
});

/** Cells [-1, 0] and [0, 1] with their own bounds. */
function twoCells(left: LocalBounds | null, right: LocalBounds | null) {
  return (lower: Float64Array, upper: Float64Array): LocalBounds | null => {
    const touched = [...(lower[0]! <= 0 ? [left] : []), ...(upper[0]! >= 0 ? [right] : [])];
    if (touched.includes(null)) return null;
    return (touched as LocalBounds[]).reduce((a, b) => ({
      rate: Math.min(a.rate, b.rate),
      pushes: a.pushes.map((value, i) => Math.max(value, b.pushes[i]!)),
      widths: a.widths.map((value, i) => Math.max(value, b.widths[i]!)),
      spreads: a.spreads.map((value, i) => Math.max(value, b.spreads[i]!)),
      authority: Math.max(a.authority, b.authority),
    }));
  };
}

const still = (): number => 0.3;
const request = { rate: 0.6, window: 0.5, initialDistance: 0 };

describe("tube along a plan over equal cells", () => {
  for (const [window, start] of [
    [0.5, 0],
    [0.5, 0.05],
    [0, 0],
    [0, 0.02],
  ] as const) {
    it(`is the fixed tube's R(t), window ${window} s, R(0) ${start}`, () => {
      const [rate, sigma, step] = [0.6, 0.1, 0.05];
      const local = () => bounds([0.04, 0.06]);
      const { steps, end } = planTube({
        steps: planOf(6, step, still),
        rate,
        window,
        initialDistance: start,
        local,
      });
      expect(end).toBeNull();
      for (const [k, { radius }] of steps.entries()) {
        // tube.ts gives R at one time; over a step the start decays from its beginning, the rest grows to its end
        const pushed = radiusAt((k + 1) * step - 1e-12, { window, sigma }, rate, 0);
        const begun = radiusAt(k * step, { window, sigma }, rate, 0);
        expect(radius).toBeCloseTo(Math.exp(-rate * k * step) * start + Math.max(pushed, begun), 11);
      }
    });
  }

  it("never exceeds the radius at rest, and tends to it", () => {
    const local = () => bounds([0.1]);
    const atRest = steadyRadius({ window: 0.5, sigma: 0.1 }, 0.6);
    const { steps } = planTube({ ...request, steps: planOf(40, 0.07, still), local });
    for (const { radius } of steps) expect(radius).toBeLessThanOrEqual(atRest * (1 + 1e-11));
    expect(steps.at(-1)!.radius).toBeCloseTo(atRest, 9);
  });

  it("asks for half the radius times the density of the inputs", () => {
    const { steps } = planTube({ ...request, steps: planOf(1, 0.05, still), local: () => bounds([0.1], 0.25, 3) });
    for (const { radius, authority } of steps) expect(authority).toBeCloseTo(1.5 * radius, 15);
  });

  it("grows in proportion to the disturbance", () => {
    const radii = [1, 2].map((times) =>
      planTube({
        ...request,
        steps: planOf(5, 0.05, still),
        local: () => bounds([0.02 * times, 0.01 * times]),
      }).steps.map(({ radius, authority }) => [radius, authority]),
    );
    for (const [k, [radius, authority]] of radii[0]!.entries()) {
      expect(radii[1]![k]![0]! / radius!).toBeCloseTo(2, 12);
      expect(radii[1]![k]![1]! / authority!).toBeCloseTo(2, 12);
    }
  });

  it("adds the plan's jumps of a window to the push of the window", () => {
    const [rate, window, step] = [0.6, 0.5, 0.05];
    const jump = 0.001;
    const { steps } = planTube({ ...request, steps: planOf(30, step, still, jump), local: () => bounds([0.1]) });
    const perWindow = window * 0.1 + (window / step) * jump;
    expect(steps.at(-1)!.radius).toBeCloseTo(perWindow / -Math.expm1(-rate * window), 8);
    // exact sum of decayed jumps and pushes at window ends is below it
    let exact = 0;
    for (let j = 0; j < 600; j++) exact += jump * Math.exp(-rate * step * j);
    for (let j = 0; j < 60; j++) exact += window * 0.1 * Math.exp(-rate * window * j);
    expect(steps.at(-1)!.radius).toBeGreaterThanOrEqual(exact);
  });
});

describe("tube along a plan over unequal cells", () => {
  const left = bounds([0.05]);
  const right = bounds([0.1]);
  /** In the left cell until 20 s, then far into the right one, at 40 s back. */
  const across = (time: number): number =>
    -0.5 + Math.min(1, Math.max(0, time - 20)) - Math.min(1, Math.max(0, time - 40));
  const fixed = steadyRadius({ window: 0.5, sigma: 0.1 }, 0.6);

  it("halves where the push is half, a window and the decay later", () => {
    const { steps } = planTube({ ...request, steps: planOf(60, 0.05, across), local: twoCells(left, right) });
    const at = (time: number): number => steps[Math.round(time / 0.05) - 1]!.radius;
    expect(at(20)).toBeCloseTo(fixed / 2, 5);
    expect(at(40)).toBeCloseTo(fixed, 5);
    expect(at(60)).toBeCloseTo(fixed / 2 + (fixed / 2) * Math.exp(-0.6 * (60 - 41)), 4);
    // the right cell counts as soon as the tube touches it, before the plan does
    const touched = steps.findIndex(({ sigma }) => sigma === 0.1);
    expect(across(0.05 * (touched + 1)) + (fixed / 2) * 0.5).toBeGreaterThanOrEqual(-1e-3);
    expect(across(0.05 * touched)).toBeLessThan(0);
    for (const { radius } of steps) expect(radius).toBeLessThanOrEqual(fixed * (1 + 1e-11));
  });

  it("takes each part of the push at its own worst time within a window", () => {
    const local = twoCells(bounds([0.1, 0.02]), bounds([0.02, 0.1]));
    const { steps } = planTube({ ...request, steps: planOf(30, 0.05, across), local });
    expect(steps[Math.round(19 / 0.05)]!.sigma).toBeCloseTo(0.12, 15);
    // the box over the border touches both cells: neither part is at its worst in the same cell as the other
    expect(Math.max(...steps.map(({ sigma }) => sigma))).toBeCloseTo(0.2, 15);
    const ofOneCell = steadyRadius({ window: 0.5, sigma: 0.12 }, 0.6);
    expect(Math.max(...steps.map(({ radius }) => radius))).toBeGreaterThan(1.05 * ofOneCell);
    expect(steps.at(-1)!.radius).toBeCloseTo(ofOneCell, 2);
  });

  it("adds parts that are worst in different steps of one window", () => {
    // 1e-4 is so small a push that no box reaches the next cell; the plan crosses from -0.5 to 0.5 within 0.2 s
    const [push, none] = [1e-4, 0];
    const local = (lower: Float64Array, upper: Float64Array): LocalBounds =>
      bounds([lower[0]! < -0.2 ? push : none, upper[0]! > 0.2 ? push : none]);
    const fast = (time: number): number => -0.5 + Math.min(1, Math.max(0, 5 * (time - 30)));
    const { steps } = planTube({ ...request, steps: planOf(40, 0.05, fast), local });
    expect(Math.max(...steps.map(({ sigma }) => sigma))).toBe(push);
    const before = steadyRadius({ window: 0.5, sigma: push }, 0.6);
    const both = Math.exp(-0.6 * 0.5) * before + 0.5 * 2 * push;
    expect(Math.max(...steps.map(({ radius }) => radius))).toBeCloseTo(both, 9);
  });

  it("holds a box that contains what the cells in it ask for", () => {
    // the left cell is so wide that the box reaches the right one, which is wider still
    const { steps } = planTube({
      ...request,
      steps: planOf(10, 0.05, () => -0.05),
      local: twoCells(bounds([0.05], 0.5), bounds([0.05], 9)),
    });
    for (const { radius, bounds: found, lower, upper } of steps) {
      const reach = radius * Math.sqrt(found.widths[0]!);
      expect(lower[0]).toBeLessThanOrEqual(-0.05 - reach);
      expect(upper[0]).toBeGreaterThanOrEqual(-0.05 + reach);
    }
    expect(steps.at(-1)!.bounds.widths[0]).toBe(9);
    expect(steps[0]!.bounds.widths[0]).toBe(0.5);
  });

  it("ends where it touches a cell without proof, and gives no number afterwards", () => {
    const { steps, end } = planTube({ ...request, steps: planOf(60, 0.05, across), local: twoCells(left, null) });
    expect(end!.kind).toBe("cells");
    expect(steps).toHaveLength(end!.step);
    // not later than the plan itself, and only once the tube gets there
    expect(0.05 * end!.step).toBeGreaterThan(20);
    expect(across(0.05 * end!.step)).toBeLessThanOrEqual(0);
    expect(end!.upper[0]).toBeGreaterThanOrEqual(0);
  });

  it("ends where it reaches out of the envelope", () => {
    const { steps, end } = planTube({
      ...request,
      steps: planOf(10, 0.05, (time) => 0.9 + 0.008 * time),
      local: () => bounds([0.1]),
    });
    expect(end).toMatchObject({ kind: "envelope", index: 0 });
    expect(end!.upper[0]).toBeGreaterThan(1);
    expect(steps.every(({ upper }) => upper[0]! <= 1)).toBe(true);
  });

  it("ends where plan and authority together need more than the inputs have", () => {
    const plan = planOf(10, 0.05, still).map((step, k) => ({
      ...step,
      inputs: Float64Array.of(k < 100 ? 0.5 : -0.97),
    }));
    const { end } = planTube({ ...request, steps: plan, local: () => bounds([0.1]) });
    expect(end).toMatchObject({ kind: "input", index: 0, step: 100 });
    expect(0.97 + end!.authority).toBeGreaterThan(1);
    expect(planTube({ ...request, steps: plan, local: () => bounds([0.1], 0.25, 0.1) }).end).toBeNull();
  });

  it("refuses steps that do not follow each other or are longer than the window", () => {
    const local = () => left;
    const plan = planOf(1, 0.05, still);
    expect(() => planTube({ ...request, steps: [plan[0]!, plan[2]!], local })).toThrow(/follow each other/);
    expect(() => planTube({ ...request, steps: planOf(3, 1, still), local })).toThrow(/longer than the window/);
    expect(() => planTube({ ...request, rate: 0, steps: plan, local })).toThrow(/rate above 0/);
  });
});

/**
 * x'' = v + w on a constant metric: M and K from LQR-like design by hand. d in the metric obeys d' <= -lambda d + |G w|_M
 * when the closed loop A - B K has A_c^T M + M A_c <= -2 lambda M. Take A_c = [[0, 1], [-k, -c]] and M from its eigenvectors:
 * for real distinct poles -p, -q the metric that is orthonormal in the modal coordinates contracts at min(p, q).
 */
describe("tube along a plan of a disturbed double integrator", () => {
  const [p, q] = [0.8, 1.4];
  // modal coordinates y = T x with rows the left eigenvectors of A_c = [[0, 1], [-p q, -(p + q)]]
  const T = [
    [q, 1],
    [p, 1],
  ] as const;
  const inverse = [
    [1 / (q - p), -1 / (q - p)],
    [-p / (q - p), q / (q - p)],
  ] as const;
  const M = [T[0][0] ** 2 + T[1][0] ** 2, T[0][0] + T[1][0], 2] as const;
  const widths = inverse.map(([a, b]) => a ** 2 + b ** 2);
  const [window, wbar] = [0.5, 0.02];
  const sigma = wbar * Math.sqrt(M[2]);
  const distance = (e: readonly number[]): number =>
    Math.sqrt(M[0] * e[0]! ** 2 + 2 * M[1] * e[0]! * e[1]! + M[2] * e[1]! ** 2);

  it("contains 400 runs whose pushes use the whole bound of every window", () => {
    const [seconds, step] = [6, 0.05];
    const plan: PlanStep[] = planOf(seconds, step, () => 0).map((at) => ({
      ...at,
      lower: Float64Array.of(0, 0),
      upper: Float64Array.of(0, 0),
    }));
    const { steps, end } = planTube({
      steps: plan,
      rate: p,
      window,
      initialDistance: 0,
      local: () => ({ rate: p, pushes: [sigma], widths, spreads: widths, authority: 0.1 }),
    });
    expect(end).toBeNull();
    const random = seededRandom(7);
    let nearest = 0;
    let outside = 0;
    const [h, perStep] = [0.0025, 20];
    for (let run = 0; run < 400; run++) {
      // every window of length T holds exactly T wbar: a periodic burst; signs as they fall, or all one way
      const width = h * (1 + random.integer(40));
      const phase = window * random.uniform();
      const signs = Array.from({ length: 30 }, () => (run % 2 === 0 || random.uniform() < 0.5 ? 1 : -1));
      const height = (wbar * window) / width;
      let e: [number, number] = [0, 0];
      for (let k = 0; k < seconds / h; k++) {
        const t = k * h + phase;
        const inBurst = t - window * Math.floor(t / window) < width - 1e-9;
        const w = inBurst ? signs[Math.floor(t / window)]! * height : 0;
        // exact step of the modal coordinates with the push held
        const y = T.map(([a, b]) => a * e[0] + b * e[1]);
        const next = [p, q].map((rate, i) => y[i]! * Math.exp(-rate * h) - (Math.expm1(-rate * h) / rate) * w);
        e = [inverse[0][0] * next[0]! + inverse[0][1] * next[1]!, inverse[1][0] * next[0]! + inverse[1][1] * next[1]!];
        const { radius, upper } = steps[Math.floor(k / perStep)]!;
        nearest = Math.max(nearest, distance(e) / radius);
        if (Math.abs(e[0]) > upper[0]! || Math.abs(e[1]) > upper[1]!) outside++;
      }
    }
    expect(outside).toBe(0);
    expect(nearest).toBeLessThanOrEqual(1);
    // the bound is of use: the worst runs come near it
    expect(nearest).toBeGreaterThan(0.6);
  });
});
