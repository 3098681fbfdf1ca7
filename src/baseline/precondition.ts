/**
 * Coordinates for the constant-metric problem: z = S y, S S^T the Riccati metric of the samples' mean plant, in which a
 * good W is near a multiple of I and the barrier method needs few steps. K -> S^-1 K S, B -> S^-1 B, G -> S^-1 G,
 * C -> S^T C, W -> S^-1 W S^-T leave contraction, sigma, margin and authority as they are. Where the mean plant has no
 * Riccati metric the coordinates stay.
 */
import { cholesky, multiply, solveLower } from "../num/dense.js";
import type { ConditionSample } from "./conditionSample.js";
import type { ConstantProblem } from "./constantProblem.js";
import { identity } from "./metricBlocks.js";
import { riccatiMetric } from "./riccatiMetric.js";

export interface Preconditioned {
  readonly problem: ConstantProblem;
  /** W of the given states, n x n, from W of the new ones. */
  readonly original: (W: Float64Array) => Float64Array;
}

/** Shift of the Riccati equation as a share of the plant's scale, and how often it is halved where there is no solution. */
const SHIFT = 0.05;
const HALVINGS = 8;

export function precondition(problem: ConstantProblem): Preconditioned {
  const { n, m, wbar, goal, rooms, samples } = problem;
  const S = factorOf(problem);
  const transposed = Float64Array.from(S, (_, at) => S[(at % n) * n + Math.floor(at / n)]!);
  const times = (a: Float64Array, b: Float64Array, columns: number): Float64Array => {
    const out = new Float64Array(n * columns);
    multiply(a, b, out, n, n, columns);
    return out;
  };
  /** S^-1 X for X (n x columns). */
  const into = (X: Float64Array, columns: number): Float64Array => {
    const out = new Float64Array(n * columns);
    for (let j = 0; j < columns; j++) {
      const column = Float64Array.from({ length: n }, (_, i) => X[i * columns + j]!);
      solveLower(S, column, n);
      for (let i = 0; i < n; i++) out[i * columns + j] = column[i]!;
    }
    return out;
  };
  const transform = ({ jacobians, B, G }: ConditionSample): ConditionSample => ({
    jacobians: jacobians.map((K) => into(times(K, S, n), n)),
    B: into(B, m),
    G: into(G, wbar.length),
  });
  return {
    problem: {
      n,
      m,
      wbar,
      goal: times(transposed, goal, goal.length / n),
      rooms: rooms.map((c) => times(transposed, c, 1)),
      samples: samples.map(transform),
    },
    original: (W) => times(times(S, W, n), transposed, n),
  };
}

function factorOf({ n, m, samples }: ConstantProblem): Float64Array {
  if (m === 0) return identity(n);
  const K = mean(samples.flatMap(({ jacobians }) => jacobians));
  const B = mean(samples.map((sample) => sample.B));
  const S = new Float64Array(n * n);
  let shift = SHIFT * Math.max(Math.hypot(...K), Math.hypot(...B));
  for (let i = 0; i < HALVINGS; i++, shift /= 2) {
    const result = riccatiMetric(K, B, shift, identity(n), identity(m));
    if (result.status === "solved" && cholesky(result.W, S, n)) return S;
  }
  return identity(n);
}

function mean(arrays: readonly Float64Array[]): Float64Array {
  const out = new Float64Array(arrays[0]!.length);
  for (const array of arrays) for (let i = 0; i < out.length; i++) out[i]! += array[i]! / arrays.length;
  return out;
}
