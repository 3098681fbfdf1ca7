/**
 * The constant-metric problem on samples and its measures. A metric W with gain rho contracts at a rate when
 * rho B B^T - K W - W K^T - 2 rate W >= 0 at every sample and input corner; with the steady factor Omega of the window
 *   margin = Omega s sqrt(w),   authority = 1/2 Omega s rho sqrt(e),
 *   s = max sum_i wbar_i sqrt(g_i^T W^-1 g_i),   e = max eigmax(B^T W^-1 B),   w = eigmax(C^T W C), C the goal.
 * Both are unchanged by W -> k W, rho -> k rho.
 */
import { cholesky, congruence, multiply, solveLower, symmetricEigen } from "../num/dense.js";
import type { ConditionSample } from "./conditionSample.js";

export interface ConstantProblem {
  readonly n: number;
  readonly m: number;
  /** Bound of each leftover channel, SI; not all zero. */
  readonly wbar: Float64Array;
  /** n x k: the goal's directions; the margin is of the worst combination (two of the position pair: planar). */
  readonly goal: Float64Array;
  /** Directions (n each) in which the tube leaves plans their room: R sqrt(c^T W c) at most a given share. */
  readonly rooms: readonly Float64Array[];
  readonly samples: readonly ConditionSample[];
}

export interface GainedMetric {
  /** n x n. */
  readonly W: Float64Array;
  readonly rho: number;
}

export interface ConstantMeasures {
  readonly s: number;
  readonly e: number;
  readonly w: number;
  /** Largest c^T W c over the directions of `rooms`; 0 without one. */
  readonly v: number;
}

export function measure({ n, m, wbar, goal, rooms, samples }: ConstantProblem, W: Float64Array): ConstantMeasures {
  let [s, e] = [0, 0];
  const p = wbar.length;
  for (const { B, G } of samples) {
    let sum = 0;
    for (let c = 0; c < p; c++) sum += wbar[c]! * Math.sqrt(inverseNorm(W, columnOf(G, n, p, c), n, 1));
    s = Math.max(s, sum);
    e = Math.max(e, inverseNorm(W, B, n, m));
  }
  const k = goal.length / n;
  const block = new Float64Array(k * k);
  congruence(W, goal, block, n, k, new Float64Array(n * k));
  const values = new Float64Array(k);
  symmetricEigen(block, k, values, null);
  const v = rooms.reduce((most, c) => {
    congruence(W, c, block, n, 1, new Float64Array(n));
    return Math.max(most, block[0]!);
  }, 0);
  return { s, e, w: Math.max(...values), v };
}

/** Omega: steady radius per sigma for the window T (s), T / (1 - e^{-rate T}), 1 / rate for T = 0. */
export function steadyFactor(rate: number, window: number): number {
  return window === 0 ? 1 / rate : -window / Math.expm1(-rate * window);
}

/** eigmax(X^T W^-1 X) for X (n x k); infinite when W is not positive definite. */
export function inverseNorm(W: Float64Array, X: Float64Array, n: number, k: number): number {
  const L = new Float64Array(n * n);
  if (!cholesky(W, L, n)) return Number.POSITIVE_INFINITY;
  const half = new Float64Array(k * n);
  const square = new Float64Array(k * k);
  for (let j = 0; j < k; j++) {
    const column = half.subarray(j * n, (j + 1) * n);
    for (let i = 0; i < n; i++) column[i] = X[i * k + j]!;
    solveLower(L, column, n);
  }
  const transposed = Float64Array.from({ length: n * k }, (_, i) => half[(i % k) * n + Math.floor(i / k)]!);
  multiply(half, transposed, square, k, n, k);
  const values = new Float64Array(k);
  symmetricEigen(square, k, values, null);
  return Math.max(0, ...values);
}

export function columnOf(G: Float64Array, n: number, p: number, c: number): Float64Array {
  return Float64Array.from({ length: n }, (_, i) => G[i * p + c]!);
}

/** rho gram - K W - W K^T - 2 rate W, n x n. */
export function conditionMatrix(
  K: Float64Array,
  W: Float64Array,
  gram: Float64Array,
  rho: number,
  rate: number,
  n: number,
): Float64Array {
  const KW = new Float64Array(n * n);
  multiply(K, W, KW, n, n, n);
  return KW.map((value, at) => {
    const i = Math.floor(at / n);
    const j = at % n;
    return rho * gram[at]! - value - KW[j * n + i]! - 2 * rate * W[at]!;
  });
}
