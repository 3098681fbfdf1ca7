/**
 * A small semidefinite program along the central path of the log-determinant barrier:
 *   minimise c^T x   subject to   S_k(x) = F_k0 + sum_i x_i F_ki >= 0   for many small symmetric blocks,
 * from a strictly feasible x, with multipliers Z_k (primal-dual path following: S Z = mu I, the barrier's optimality
 * condition). Source: Boyd and Vandenberghe, "Convex Optimization", 2004, chapter 11; Todd, Toh and Tutuncu, "On the
 * Nesterov-Todd direction in semidefinite programming", SIAM J. Optim. 8(3), 1998, with Mehrotra's predictor and
 * corrector (SIAM J. Optim. 2(4), 1992). Following the barrier in x alone was tried first: from starts near a boundary
 * it needs hundreds of Newton steps where this needs some fifteen.
 *
 * x stays strictly feasible. Multipliers Z_k > 0 with sum_k tr(F_ki Z_k) = c_i bound value - optimum by
 * sum_k tr(S_k Z_k). The whole Newton step to the centre meets these equations; only while it leaves Z_k > 0, which is
 * the check that x is near the centre, is that gap reported, else it is null.
 */
import { cholesky, solveLower, solveLowerTransposed } from "../num/dense.js";
import { type Block, type SemidefiniteBlock, semidefiniteBlock } from "./semidefiniteBlock.js";

export type { Block } from "./semidefiniteBlock.js";

export interface BarrierResult {
  /**
   * solved: the stop rule held. stalled: x is feasible, but rounding, an unbounded program or the step limit stopped it
   * short. infeasibleStart: the start is not strictly inside; x is the start.
   */
  readonly status: "solved" | "stalled" | "infeasibleStart";
  readonly x: Float64Array;
  readonly value: number;
  /** Proved upper bound of value - optimum; null when there is none. */
  readonly gap: number | null;
  readonly newtonSteps: number;
}

/** Asked at every point; gap as in the result. */
export type StopRule = (value: number, gap: number | null) => boolean;

/** Stops when the gap is below this share of 1 + |value|. */
export function relativeGap(share: number): StopRule {
  return (value, gap) => gap !== null && gap <= share * (1 + Math.abs(value));
}

const MOST_STEPS = 100;
/** Share of the way to the boundary. */
const SHARE = 0.95;
const SHORTEST = 1e-7;

export function minimise(
  c: Float64Array,
  blocks: readonly Block[],
  start: Float64Array,
  shouldStop: StopRule,
): BarrierResult {
  const n = c.length;
  const theta = blocks.reduce((sum, block) => sum + block.size, 0);
  const x = start.slice();
  const cones = blocks.map(semidefiniteBlock);
  const newton = newtonSystem(n);
  const side = new Float64Array(n);
  const dx = new Float64Array(n);
  const next = new Float64Array(n);
  let gap: number | null = null;
  let steps = 0;
  const finish = (status: BarrierResult["status"]): BarrierResult => ({
    status,
    x,
    value: dot(c, x),
    gap,
    newtonSteps: steps,
  });
  const firstMu = (1 + Math.abs(dot(c, x))) / theta;
  if (!cones.every((cone) => cone.start(x, firstMu))) return finish("infeasibleStart");
  for (; ; steps++) {
    if (!cones.every((cone) => cone.scale())) return finish("stalled");
    const product = cones.reduce((sum, cone) => sum + cone.product(), 0);
    if (!newton.factor(cones)) return finish("stalled");
    const solve = (target: number, corrected: boolean, share: number): { slack: number; multiplier: number } => {
      for (let i = 0; i < n; i++) side[i] = -c[i]!;
      for (const cone of cones) cone.aim(target, corrected, side);
      newton.solve(side, dx);
      const step = { slack: 1, multiplier: 1 };
      for (const cone of cones) {
        cone.direct(dx, share);
        step.slack = Math.min(step.slack, cone.step.slack);
        step.multiplier = Math.min(step.multiplier, cone.step.multiplier);
      }
      return step;
    };
    // the whole step to the centre makes the multipliers meet the equations; they are positive when x is near it
    const isNearCentre = solve(product / theta, false, 1).multiplier === 1;
    gap = isNearCentre ? cones.reduce((sum, cone) => sum + cone.productAlong(0, 1), 0) : null;
    if (shouldStop(dot(c, x), gap)) return finish("solved");
    if (steps === MOST_STEPS) return finish("stalled");

    const predicted = solve(0, false, SHARE);
    const left = cones.reduce((sum, cone) => sum + cone.productAlong(predicted.slack, predicted.multiplier), 0);
    const centring = Math.max(1e-6, Math.min(1, Math.max(0, left / product) ** 3));
    const step = solve((centring * product) / theta, true, SHARE);
    if (!dx.every(Number.isFinite) || Math.max(step.slack, step.multiplier) < SHORTEST) return finish("stalled");
    let length = step.slack;
    const move = (): boolean => {
      for (let i = 0; i < n; i++) next[i] = x[i]! + length * dx[i]!;
      return cones.every((cone) => cone.moveTo(next, step.multiplier));
    };
    while (!move()) {
      length /= 2;
      if (length < SHORTEST) {
        gap = null;
        return finish("stalled");
      }
    }
    x.set(next);
  }
}

function dot(a: Float64Array, b: Float64Array): number {
  let sum = 0;
  for (let i = 0; i < a.length; i++) sum += a[i]! * b[i]!;
  return sum;
}

/** Newton's equations, scaled to a unit diagonal, by Cholesky and one step of iterative refinement. */
function newtonSystem(n: number) {
  const matrix = new Float64Array(n * n);
  const scaled = new Float64Array(n * n);
  const factor = new Float64Array(n * n);
  const scale = new Float64Array(n);
  const rest = new Float64Array(n);
  return {
    /** False when the matrix is not positive definite to rounding. */
    factor(cones: readonly SemidefiniteBlock[]): boolean {
      matrix.fill(0);
      for (const cone of cones) cone.addNewtonMatrix(matrix, n);
      for (let i = 0; i < n; i++) scale[i] = 1 / Math.sqrt(matrix[i * n + i]!);
      for (let i = 0; i < n; i++) {
        for (let j = 0; j <= i; j++) {
          scaled[i * n + j] = scaled[j * n + i] = matrix[i * n + j]! * scale[i]! * scale[j]!;
        }
      }
      for (let ridge = 0; ridge < 1e-7; ridge = ridge === 0 ? 1e-15 : ridge * 10) {
        for (let i = 0; i < n; i++) scaled[i * n + i] = 1 + ridge;
        const isFactored = cholesky(scaled, factor, n);
        for (let i = 0; i < n; i++) scaled[i * n + i] = 1;
        if (isFactored) return true;
      }
      return false;
    },
    solve(side: Float64Array, out: Float64Array): void {
      out.fill(0);
      for (let pass = 0; pass < 2; pass++) {
        for (let i = 0; i < n; i++) {
          let sum = side[i]! * scale[i]!;
          for (let j = 0; j < n; j++) sum -= scaled[i * n + j]! * out[j]!;
          rest[i] = sum;
        }
        solveLower(factor, rest, n);
        solveLowerTransposed(factor, rest, n);
        for (let i = 0; i < n; i++) out[i]! += rest[i]!;
      }
      for (let i = 0; i < n; i++) out[i]! *= scale[i]!;
    },
  };
}
