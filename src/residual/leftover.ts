/**
 * What a model leaves unexplained, by windows, without differentiating the log. Per step k of a piece, in scaled states:
 *   e_k = z_{k+1} - z_k - h_k (f_k + f_{k+1}) / 2 - h_k (B_k + B_{k+1}) / 2 v_k      (trapezoid, input held)
 *   w_k = G(z_k)^+ e_k                                                               (least squares)
 * and over a window of length T the mean leftover is sum w_k / T, in SI of each channel. The part of e_k outside the
 * range of G is kept apart: no declared channel explains it.
 */
import type { Run } from "../logs/recording.js";
import { type ControlAffineModel, newModelPoint } from "../model/controlAffine.js";
import { cholesky, solveLower, solveLowerTransposed } from "../num/dense.js";
import type { Scaling } from "../plant/scaling.js";

/** Running sums over the steps of one piece: row k is the sum of the first k steps. */
export interface LeftoverSums {
  /** s, N. */
  readonly time: Float64Array;
  /** N x p, SI * s. */
  readonly channels: Float64Array;
  /** N x n, scaled: the whole step error e, for the rates' own residual. */
  readonly rates: Float64Array;
  /** N x n, scaled: e - G w. */
  readonly outside: Float64Array;
  /** N + 1: how many of the samples before this one lie outside the envelope in an active state. */
  readonly strays: Int32Array;
}

export function leftoverSums(model: ControlAffineModel, scaling: Scaling, run: Run): LeftoverSums[] {
  const { n, m, p } = model;
  const z = [new Float64Array(n), new Float64Array(n)] as const;
  const points = [newModelPoint(n, m, p), newModelPoint(n, m, p)] as const;
  const gram = new Float64Array(p * p);
  const factor = new Float64Array(p * p);
  const w = new Float64Array(p);
  const e = new Float64Array(n);
  return run.pieces.map(({ time, states, inputs }) => {
    const count = time.length;
    const channels = new Float64Array(count * p);
    const rates = new Float64Array(count * n);
    const outside = new Float64Array(count * n);
    const strays = new Int32Array(count + 1);
    const load = (k: number): void => {
      const target = z[(k & 1) as 0 | 1];
      for (let i = 0; i < n; i++) target[i] = (states[k * n + i]! - scaling.stateCenter[i]!) / scaling.stateHalf[i]!;
      model.evaluate(target, points[(k & 1) as 0 | 1]);
      const isStray = model.active.some((i) => Math.abs(target[i]!) > 1);
      strays[k + 1] = strays[k]! + (isStray ? 1 : 0);
    };
    if (count > 0) load(0);
    for (let k = 0; k + 1 < count; k++) {
      load(k + 1);
      const [here, next] = [points[(k & 1) as 0 | 1], points[((k + 1) & 1) as 0 | 1]];
      const [zHere, zNext] = [z[(k & 1) as 0 | 1], z[((k + 1) & 1) as 0 | 1]];
      const h = time[k + 1]! - time[k]!;
      for (let i = 0; i < n; i++) {
        let rate = (here.f[i]! + next.f[i]!) / 2;
        for (let j = 0; j < m; j++) {
          const v = (inputs[k * m + j]! - scaling.inputCenter[j]!) / scaling.inputHalf[j]!;
          rate += ((here.B[i * m + j]! + next.B[i * m + j]!) / 2) * v;
        }
        e[i] = zNext[i]! - zHere[i]! - h * rate;
      }
      leastSquares(here.G, e, w, n, p, gram, factor);
      for (let c = 0; c < p; c++) channels[(k + 1) * p + c] = channels[k * p + c]! + w[c]!;
      for (let i = 0; i < n; i++) {
        let rest = e[i]!;
        for (let c = 0; c < p; c++) rest -= here.G[i * p + c]! * w[c]!;
        rates[(k + 1) * n + i] = rates[k * n + i]! + e[i]!;
        outside[(k + 1) * n + i] = outside[k * n + i]! + rest;
      }
    }
    return { time, channels, rates, outside, strays };
  });
}

/** w = (G^T G)^{-1} G^T e; the plant reader has checked that G has full column rank. */
function leastSquares(
  G: Float64Array,
  e: Float64Array,
  w: Float64Array,
  n: number,
  p: number,
  gram: Float64Array,
  factor: Float64Array,
): void {
  for (let a = 0; a < p; a++) {
    let right = 0;
    for (let i = 0; i < n; i++) right += G[i * p + a]! * e[i]!;
    w[a] = right;
    for (let b = 0; b < p; b++) {
      let sum = 0;
      for (let i = 0; i < n; i++) sum += G[i * p + a]! * G[i * p + b]!;
      gram[a * p + b] = sum;
    }
  }
  if (!cholesky(gram, factor, p)) {
    w.fill(Number.NaN);
    return;
  }
  solveLower(factor, w, p);
  solveLowerTransposed(factor, w, p);
}

/**
 * Calls `visit` with the mean of each column over every window of length T (s) that fits in the piece, sliding by one
 * sample; a window is whole steps, the first that last at least T, and its own length divides the sum.
 */
export function forEachWindow(
  time: Float64Array,
  sums: Float64Array,
  columns: number,
  window: number,
  visit: (mean: Float64Array, start: number, end: number) => void,
): void {
  const mean = new Float64Array(columns);
  let end = 0;
  for (let start = 0; start < time.length; start++) {
    while (end < time.length && time[end]! - time[start]! < window - 1e-9) end++;
    if (end >= time.length) return;
    const length = time[end]! - time[start]!;
    for (let c = 0; c < columns; c++) mean[c] = (sums[end * columns + c]! - sums[start * columns + c]!) / length;
    visit(mean, start, end);
  }
}
