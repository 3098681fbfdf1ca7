/**
 * The shortest path from the planned to the actual state in the metric M = W^{-1}: least energy over the inner values of a
 * polynomial path (pathEnergy.ts), by BFGS on the inverse Hessian with Armijo backtracking (Nocedal and Wright, "Numerical
 * Optimization", 2nd ed., 2006, equation 6.17 and algorithm 3.1). It starts from 1/2 K^{-1} (x) W_qq, K = sum_k w_k D_k^T D_k
 * over the inner points: exact where W is constant. Along a run both the path's bend and the inverse Hessian are kept from
 * the call before. Everything is relative to the energy, so short paths are as exact as long ones.
 *
 * What holds when the path is not the shortest. E is a function of both ends and of the path's bend away from the straight
 * line between them. With the ends moving and the bend held, as the next call starts, 1/2 E' = 1/2 dE/dx(1) . x' + 1/2
 * dE/dx(0) . x*' without any remainder. For the shortest path these slopes are M x_s(1) and -M x_s(0) (first variation). The
 * law uses the slopes themselves, in the places of M x_s, and this path's own E, not the unknown d^2: then E' <= -2 lambda E
 * holds for the path carried on, however far from the shortest it is, and a lower path found from there only helps. A
 * tube read off E is not too small, since any path has d^2 <= L^2 <= E (Cauchy-Schwarz). What is lost: (1) the
 * slopes' length may exceed sqrt(E), so a disturbance pushes by up to `endGain` sigma instead of sigma; (2) that an
 * input meets the inequality is known for shortest paths only; the law says when it falls short; (3) E is a
 * quadrature: it may miss the path's own energy to either side, far less than `speedError` when the degree is enough
 * (a shortest path has constant speed); raise the degree where that is not small.
 */
import { cholesky, solveLower, solveLowerTransposed } from "../num/dense.js";
import { chebyshev } from "./chebyshev.js";
import { pathEnergy } from "./pathEnergy.js";
import type { WorldMetric } from "./worldMetric.js";

export interface PathSettings {
  /** N, polynomial degree of the path; 2 or more. */
  readonly degree: number;
  /** Converged at this `residual`; not below 1e-7, where the rounding of the energy hides what is gained. */
  readonly tolerance: number;
  readonly maxIterations: number;
}

export const PATH_SETTINGS: PathSettings = { degree: 4, tolerance: 1e-5, maxIterations: 60 };

/** Of the last `find`; overwritten by the next. */
export interface ShortestPath {
  /** notPositive: W is not positive definite on the path started from, which the next call forgets; nothing else is set. */
  status: "converged" | "notConverged" | "notPositive";
  /** E, the squared length when converged. */
  energy: number;
  /** sqrt of the relative energy still to be gained, as the quadratic model has it. */
  residual: number;
  /** Largest relative deviation of the speed at a point from sqrt(E). */
  speedError: number;
  /** Length of momentumEnd over sqrt(E): 1 for a shortest path. */
  endGain: number;
  iterations: number;
  /** n each: x_s at s = 0 and 1. */
  readonly tangentStart: Float64Array;
  readonly tangentEnd: Float64Array;
  /** n each: -1/2 dE/dx(0) and 1/2 dE/dx(1), the bend held, which are M x_s at s = 0 and 1 for the shortest path. */
  readonly momentumStart: Float64Array;
  readonly momentumEnd: Float64Array;
}

export interface PathFinder {
  /** From x* to x (n each, scaled; headings unwrapped, so that both are within pi of each other). */
  find(from: Float64Array, to: Float64Array): ShortestPath;
  /** Forgets the path before. */
  reset(): void;
  /** What every find returns. */
  readonly result: ShortestPath;
}

/** Below this energy the path is taken as a point: rounding of the states themselves. */
export const NO_DISTANCE = 1e-26;
const ARMIJO = 1e-4;
const SHORTEST_STEP = 2 ** -30;

export function pathFinder(metric: WorldMetric, settings: PathSettings = PATH_SETTINGS): PathFinder {
  const { n, varying } = metric;
  const rule = chebyshev(settings.degree);
  const path = pathEnergy(metric, rule);
  const nq = varying.length;
  const size = path.unknowns;
  const inner = new Float64Array(size);
  const trial = new Float64Array(size);
  const bend = new Float64Array(size);
  const gradient = new Float64Array(size);
  const trialGradient = new Float64Array(size);
  const step = new Float64Array(size);
  const change = new Float64Array(size);
  const raised = new Float64Array(n);
  const mapped = new Float64Array(size);
  const H = new Float64Array(size * size);
  const inverseK = inverseStiffness(rule.degree, rule.weights, rule.derivative);
  const lastFrom = new Float64Array(n);
  const lastTo = new Float64Array(n);
  let warm = false;
  const result: ShortestPath = {
    status: "converged",
    energy: 0,
    residual: 0,
    speedError: 0,
    endGain: 1,
    iterations: 0,
    tangentStart: new Float64Array(n),
    tangentEnd: new Float64Array(n),
    momentumStart: new Float64Array(n),
    momentumEnd: new Float64Array(n),
  };

  const resetHessian = (): void => {
    const W = path.W[rule.degree]!;
    const inside = rule.degree - 1;
    for (let a = 0; a < inside; a++) {
      for (let b = 0; b < inside; b++) {
        const k = inverseK[a * inside + b]! / 2;
        for (let i = 0; i < nq; i++) {
          for (let j = 0; j < nq; j++) H[(a * nq + i) * size + b * nq + j] = k * W[varying[i]! * n + varying[j]!]!;
        }
      }
    }
  };

  /** Both ends moved by less than the path before is long, in every scaled state. */
  const followsLast = (from: Float64Array, to: Float64Array): boolean => {
    let long = 0;
    let moved = 0;
    for (let i = 0; i < n; i++) {
      long = Math.max(long, Math.abs(lastTo[i]! - lastFrom[i]!));
      moved = Math.max(moved, Math.abs(to[i]! - lastTo[i]! - (from[i]! - lastFrom[i]!)));
    }
    return moved < long;
  };

  const straighten = (): void => {
    bend.fill(0);
    resetHessian();
    setInner();
  };
  const setInner = (): void => {
    for (let k = 1, at = 0; k < rule.degree; k++) {
      for (let i = 0; i < nq; i++, at++) inner[at] = rule.points[k]! * path.gap[i]! + bend[at]!;
    }
  };

  /** step = -H gradient; returns gradient^T H gradient. */
  const setStep = (): number => {
    let slope = 0;
    for (let i = 0, at = 0; i < size; i++) {
      let sum = 0;
      for (let j = 0; j < size; j++, at++) sum += H[at]! * gradient[j]!;
      step[i] = -sum;
      slope += sum * gradient[i]!;
    }
    return slope;
  };

  /** The longest of 1, 1/2, 1/4, ... of the step that lowers the energy enough; its energy, or NaN when none does. */
  const search = (energy: number, slope: number): number => {
    for (let length = 1; length >= SHORTEST_STEP; length /= 2) {
      for (let i = 0; i < size; i++) trial[i] = inner[i]! + length * step[i]!;
      const found = path.evaluate(trial, trialGradient);
      if (found <= energy - ARMIJO * length * slope) return found;
    }
    return Number.NaN;
  };

  /** Takes the trial point; BFGS update of H. */
  const accept = (): void => {
    let curvature = 0;
    for (let i = 0; i < size; i++) {
      step[i] = trial[i]! - inner[i]!;
      change[i] = trialGradient[i]! - gradient[i]!;
      curvature += step[i]! * change[i]!;
    }
    inner.set(trial);
    gradient.set(trialGradient);
    if (!(curvature > 0)) return;
    let square = 0;
    for (let i = 0, at = 0; i < size; i++) {
      let sum = 0;
      for (let j = 0; j < size; j++, at++) sum += H[at]! * change[j]!;
      mapped[i] = sum;
      square += sum * change[i]!;
    }
    const outer = (1 + square / curvature) / curvature;
    for (let i = 0, at = 0; i < size; i++) {
      const si = step[i]!;
      const mi = mapped[i]!;
      for (let j = 0; j < size; j++, at++) {
        H[at]! += outer * si * step[j]! - (si * mapped[j]! + mi * step[j]!) / curvature;
      }
    }
  };

  const find = (from: Float64Array, to: Float64Array): ShortestPath => {
    result.iterations = 0;
    if (!path.setEnds(from, to)) return failed();
    const kept = warm && followsLast(from, to);
    if (kept) setInner();
    else straighten();
    let energy = path.evaluate(inner, gradient);
    if (!Number.isFinite(energy)) return failed();
    let fresh = !kept;
    for (;;) {
      const slope = energy > NO_DISTANCE ? setStep() : 0;
      result.residual = Math.sqrt(Math.abs(slope) / (2 * Math.max(energy, NO_DISTANCE)));
      result.status = result.residual <= settings.tolerance ? "converged" : "notConverged";
      if (result.status === "converged" || result.iterations >= settings.maxIterations) break;
      result.iterations++;
      const found = slope > 0 ? search(energy, slope) : Number.NaN;
      if (Number.isNaN(found)) {
        path.evaluate(inner, gradient);
        if (fresh) break;
        resetHessian();
        fresh = true;
        continue;
      }
      energy = found;
      fresh = false;
      accept();
    }
    keep(from, to);
    report(energy);
    return result;
  };

  const failed = (): ShortestPath => {
    warm = false;
    result.status = "notPositive";
    return result;
  };

  const keep = (from: Float64Array, to: Float64Array): void => {
    warm = true;
    lastFrom.set(from);
    lastTo.set(to);
    for (let k = 1, at = 0; k < rule.degree; k++) {
      for (let i = 0; i < nq; i++, at++) bend[at] = inner[at]! - rule.points[k]! * path.gap[i]!;
    }
  };

  /** W_k y into out; returns y^T W_k y. */
  const raise = (k: number, y: Float64Array, out: Float64Array): number => {
    const Wk = path.W[k]!;
    let square = 0;
    for (let i = 0, at = 0; i < n; i++) {
      let row = 0;
      for (let j = 0; j < n; j++, at++) row += Wk[at]! * y[j]!;
      out[i] = row;
      square += y[i]! * row;
    }
    return square;
  };

  const report = (energy: number): void => {
    const { momenta } = path;
    const { momentumStart, momentumEnd, tangentStart, tangentEnd } = result;
    const last = rule.degree;
    path.endSlopes(momentumStart, momentumEnd);
    for (let i = 0; i < n; i++) momentumStart[i] = -momentumStart[i]!;
    result.energy = energy;
    result.speedError = 0;
    result.endGain = 1;
    if (energy > NO_DISTANCE) {
      for (let k = 0; k <= last; k++) {
        const speed = Math.sqrt(raise(k, momenta[k]!, raised) / energy);
        result.speedError = Math.max(result.speedError, Math.abs(speed - 1));
      }
      result.endGain = Math.sqrt(raise(last, momentumEnd, raised) / energy);
    }
    raise(0, momenta[0]!, tangentStart);
    raise(last, momenta[last]!, tangentEnd);
  };

  return {
    result,
    find,
    reset: () => {
      warm = false;
    },
  };
}

/** K^{-1}, (N - 1) x (N - 1): K_ij = sum_k w_k D_ki D_kj over the inner points. */
function inverseStiffness(degree: number, weights: Float64Array, derivative: Float64Array): Float64Array {
  const size = degree + 1;
  const inside = degree - 1;
  const K = new Float64Array(inside * inside);
  for (let i = 0; i < inside; i++) {
    for (let j = 0; j < inside; j++) {
      for (let k = 0; k < size; k++) {
        K[i * inside + j]! += weights[k]! * derivative[k * size + i + 1]! * derivative[k * size + j + 1]!;
      }
    }
  }
  const factor = new Float64Array(inside * inside);
  cholesky(K, factor, inside);
  const inverse = new Float64Array(inside * inside);
  const column = new Float64Array(inside);
  for (let j = 0; j < inside; j++) {
    column.fill(0);
    column[j] = 1;
    solveLower(factor, column, inside);
    solveLowerTransposed(factor, column, inside);
    for (let i = 0; i < inside; i++) inverse[i * inside + j] = column[i]!;
  }
  return inverse;
}
