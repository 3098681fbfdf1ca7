/**
 * A plan as the tube needs it. Between two samples the planned state moves as the fitted model does from the first of them
 * under the held inputs (classical Runge-Kutta: Kutta, Zeitschrift fuer Mathematik und Physik 46, 1901); at the second it
 * jumps to that sample. So the planned state obeys the model exactly but for its jumps: how far the plan is from being a
 * motion of the model, step by step. A jump e has the length sqrt(e^T W^{-1} e) in the metric; it adds to the tube's radius.
 *
 * Steps are at most a share of the disturbance window long, so that little is lost by taking each at its worst. The box of a
 * step is the hull of its integrated states, wider by h |z'(end) - z'(start)|: eight times the distance at which a smooth
 * motion may bend away from its chord (h^2 / 8 |z''|). Integration is in float64: it is no part of the proof.
 */
import type { Piece } from "../logs/recording.js";
import { type ControlAffineModel, newModelPoint } from "../model/controlAffine.js";
import type { DualMetric } from "../nets/dualMetric.js";
import { cholesky, solveLower } from "../num/dense.js";
import type { Scaling } from "../plant/scaling.js";
import type { PlanStep } from "./planTube.js";

/** The plan's steps, and how far it jumps at every sample. */
export interface PlanMotion {
  readonly steps: readonly PlanStep[];
  /** Of each step, the sample that it follows. */
  readonly sampleOf: readonly number[];
  /** N x n, scaled: sample k less where the model arrives from sample k - 1; row 0 is 0. */
  readonly defects: Float64Array;
  /** N: their lengths in the metric. */
  readonly jumps: Float64Array;
}

/** Longest step, as a share of the window. */
const WINDOW_PARTS = 16;
/** Runge-Kutta steps in a step. */
const SUBSTEPS = 2;
/** The metric is taken at both ends of a jump; it differs little in between. */
const JUMP_SLACK = 1.01;

/** window: s. Throws when two stamps are the same to the nanosecond. */
export function planMotion(
  model: ControlAffineModel,
  metric: DualMetric,
  scaling: Scaling,
  { time, states, inputs }: Piece,
  window: number,
): PlanMotion {
  const { n, m, active } = model;
  const count = time.length;
  const stamps = Array.from(time, (t) => Math.round((t - time[0]!) * 1e9));
  const sample = (k: number): Float64Array =>
    Float64Array.from({ length: n }, (_, i) => (states[k * n + i]! - scaling.stateCenter[i]!) / scaling.stateHalf[i]!);
  const held = (k: number): Float64Array =>
    Float64Array.from({ length: m }, (_, j) => (inputs[k * m + j]! - scaling.inputCenter[j]!) / scaling.inputHalf[j]!);
  const rates = modelRates(model);
  const lengthOf = jumpLength(model, metric);
  const steps: PlanStep[] = [];
  const sampleOf: number[] = [];
  const defects = new Float64Array(count * n);
  const jumps = new Float64Array(count);
  for (let k = 0; k + 1 < count; k++) {
    const [from, to] = [stamps[k]!, stamps[k + 1]!];
    if (!(to > from)) throw new Error(`two stamps of the plan are ${time[k]} s to the nanosecond; drop one of them`);
    const most = window > 0 ? (window * 1e9) / WINDOW_PARTS : to - from;
    const parts = Math.max(1, Math.ceil((to - from) / most));
    const v = held(k);
    let z = sample(k);
    for (let part = 0; part < parts; part++) {
      const start = from + Math.floor(((to - from) * part) / parts);
      const end = from + Math.floor(((to - from) * (part + 1)) / parts);
      const moved = move(rates, z, v, (end - start) * 1e-9);
      const pick = (values: Float64Array): Float64Array => Float64Array.from(active, (i) => values[i]!);
      steps.push({
        start,
        end,
        lower: pick(moved.lower),
        upper: pick(moved.upper),
        inputs: v,
        jump: part === 0 ? jumps[k]! : 0,
      });
      sampleOf.push(k);
      z = moved.end;
    }
    const next = sample(k + 1);
    for (let i = 0; i < n; i++) defects[(k + 1) * n + i] = next[i]! - z[i]!;
    jumps[k + 1] = JUMP_SLACK * lengthOf(z, next);
  }
  return { steps, sampleOf, defects, jumps };
}

type Rates = (z: Float64Array, v: Float64Array) => Float64Array;

function modelRates(model: ControlAffineModel): Rates {
  const { n, m, p } = model;
  const point = newModelPoint(n, m, p);
  return (z, v) => {
    model.evaluate(z, point);
    return point.f.map((rate, i) => {
      let total = rate;
      for (let j = 0; j < m; j++) total += point.B[i * m + j]! * v[j]!;
      return total;
    });
  };
}

function move(rates: Rates, start: Float64Array, v: Float64Array, seconds: number) {
  const h = seconds / SUBSTEPS;
  const lower = start.slice();
  const upper = start.slice();
  const first = rates(start, v);
  let z = start;
  let slope = first;
  for (let s = 0; s < SUBSTEPS; s++) {
    const at = (k: Float64Array, share: number): Float64Array => z.map((value, i) => value + share * h * k[i]!);
    const k2 = rates(at(slope, 1 / 2), v);
    const k3 = rates(at(k2, 1 / 2), v);
    const k4 = rates(at(k3, 1), v);
    z = z.map((value, i) => value + (h / 6) * (slope[i]! + 2 * k2[i]! + 2 * k3[i]! + k4[i]!));
    slope = rates(z, v);
    for (const [i, value] of z.entries()) {
      lower[i] = Math.min(lower[i]!, value);
      upper[i] = Math.max(upper[i]!, value);
    }
  }
  for (const [i, value] of slope.entries()) {
    const bend = seconds * Math.abs(value - first[i]!);
    lower[i]! -= bend;
    upper[i]! += bend;
  }
  return { end: z, lower, upper };
}

/** Length of the jump between two nearby states, the larger of the metrics at its ends. */
function jumpLength(model: ControlAffineModel, metric: DualMetric) {
  const { n, rotation } = model;
  const W = new Float64Array(n * n);
  const factor = new Float64Array(n * n);
  const none = new Float64Array(0);
  const lengthAt = (z: Float64Array, e: Float64Array): number => {
    metric.evaluate(z, none, 0, W, none);
    if (!cholesky(W, factor, n)) return Number.POSITIVE_INFINITY;
    const body = e.slice();
    if (rotation !== null) {
      // W is the body frame's there: the position part is turned back by the heading
      const { position, heading, headingHalf } = rotation;
      const [a, b] = position;
      const angle = headingHalf * (z[heading]! - headingZero(model));
      const [cos, sin] = [Math.cos(angle), Math.sin(angle)];
      body[a] = cos * e[a]! + sin * e[b]!;
      body[b] = -sin * e[a]! + cos * e[b]!;
    }
    solveLower(factor, body, n);
    return Math.hypot(...body);
  };
  return (from: Float64Array, to: Float64Array): number => {
    const e = to.map((value, i) => value - from[i]!);
    return Math.max(lengthAt(from, e), lengthAt(to, e));
  };
}

/** Scaled heading of 0 rad. */
function headingZero(model: ControlAffineModel): number {
  const z = new Float64Array(model.n);
  model.embed(new Float64Array(model.active.length), z);
  return z[model.rotation!.heading]!;
}
