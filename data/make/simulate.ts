/**
 * Simulation shared by the data maker's plants: classical Runge-Kutta (Kutta, 1901) at a fifth of the log's step, a
 * bounded band-limited disturbance, inputs held from sample to sample, sensor noise. All invented.
 */
import type { Random } from "../../src/num/random.js";

/** The truth of one plant. Only the data maker and tests see it. SI. */
export interface Truth {
  readonly states: readonly {
    readonly name: string;
    readonly unit: string;
    readonly noise: number;
    readonly wraps?: boolean;
  }[];
  readonly inputs: readonly {
    readonly name: string;
    readonly unit: string;
    readonly range: readonly [number, number];
  }[];
  /** Bound of each disturbance channel. */
  readonly disturbance: readonly number[];
  /** xdot(x, u, w). */
  readonly rates: (x: readonly number[], u: readonly number[], w: readonly number[]) => number[];
  /** First state of a run by its index, from 0. */
  readonly start: (random: Random, run: number) => number[];
  /** The input law of one run: called once a sample with the true state. */
  readonly excitation: (random: Random) => (time: number, x: readonly number[]) => number[];
}

export interface SimulatedRun {
  readonly time: Float64Array;
  /** N x n measured, N x n true, N x m. */
  readonly measured: Float64Array;
  readonly exact: Float64Array;
  readonly inputs: Float64Array;
  /** N x p, the disturbance at the samples. */
  readonly disturbance: Float64Array;
}

export const STEP = 0.02;
const SUBSTEPS = 5;

export function simulateRun(truth: Truth, seconds: number, random: Random, index: number): SimulatedRun {
  const { states, inputs, disturbance, rates } = truth;
  const [n, m, p] = [states.length, inputs.length, disturbance.length];
  const count = Math.round(seconds / STEP) + 1;
  const w = disturbance.map((bound) => boundedSignal(bound, random));
  const law = truth.excitation(random);
  let x = truth.start(random, index);
  const run = {
    time: Float64Array.from({ length: count }, (_, k) => k * STEP),
    measured: new Float64Array(count * n),
    exact: new Float64Array(count * n),
    inputs: new Float64Array(count * m),
    disturbance: new Float64Array(count * p),
  };
  for (let k = 0; k < count; k++) {
    const time = k * STEP;
    const u = law(time, x).map((value, j) => clamp(value, inputs[j]!.range));
    for (const [i, state] of states.entries()) {
      const noisy = x[i]! + state.noise * random.normal();
      run.exact[k * n + i] = x[i]!;
      run.measured[k * n + i] = state.wraps ? wrapped(noisy) : noisy;
    }
    run.inputs.set(u, k * m);
    run.disturbance.set(
      w.map((signal) => signal(time)),
      k * p,
    );
    for (let s = 0; s < SUBSTEPS; s++) {
      const h = STEP / SUBSTEPS;
      x = rungeKutta(
        (t, y) =>
          rates(
            y,
            u,
            w.map((signal) => signal(t)),
          ),
        time + s * h,
        x,
        h,
      );
    }
  }
  return run;
}

/** One classical Runge-Kutta step. */
export function rungeKutta(
  f: (t: number, x: readonly number[]) => number[],
  t: number,
  x: readonly number[],
  h: number,
): number[] {
  const shifted = (k: readonly number[], scale: number): number[] => x.map((value, i) => value + scale * k[i]!);
  const k1 = f(t, x);
  const k2 = f(t + h / 2, shifted(k1, h / 2));
  const k3 = f(t + h / 2, shifted(k2, h / 2));
  const k4 = f(t + h, shifted(k3, h));
  return x.map((value, i) => value + (h / 6) * (k1[i]! + 2 * k2[i]! + 2 * k3[i]! + k4[i]!));
}

/** Three slow sines (0.02 to 0.2 Hz) with random shares that sum to at most the bound. */
function boundedSignal(bound: number, random: Random): (time: number) => number {
  const parts = Array.from({ length: 3 }, () => ({
    share: random.uniform(),
    frequency: 2 * Math.PI * (0.02 + 0.18 * random.uniform()),
    phase: 2 * Math.PI * random.uniform(),
  }));
  const scale = (bound * (0.6 + 0.4 * random.uniform())) / parts.reduce((sum, part) => sum + part.share, 0);
  return (time) =>
    scale * parts.reduce((sum, part) => sum + part.share * Math.sin(part.frequency * time + part.phase), 0);
}

/** Holds a draw for a random time between the limits (s), then draws again. */
export function heldDraws(
  random: Random,
  [least, most]: readonly [number, number],
  draw: () => number,
): (time: number) => number {
  let value = draw();
  let until = least + (most - least) * random.uniform();
  return (time) => {
    while (time >= until) {
      value = draw();
      until += least + (most - least) * random.uniform();
    }
    return value;
  };
}

/** A point of a box: each coordinate on a face with probability `onFace`, else uniform. */
export function boxPoint(random: Random, box: readonly (readonly [number, number])[], onFace: number): number[] {
  return box.map(([low, high]) => {
    if (random.uniform() < onFace) return random.uniform() < 0.5 ? low : high;
    return low + (high - low) * random.uniform();
  });
}

export function between(random: Random, low: number, high: number): number {
  return low + (high - low) * random.uniform();
}

function clamp(value: number, [low, high]: readonly [number, number]): number {
  return Math.min(high, Math.max(low, value));
}

function wrapped(angle: number): number {
  return Math.atan2(Math.sin(angle), Math.cos(angle));
}
