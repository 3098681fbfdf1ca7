/**
 * A small semidefinite program by the log-determinant barrier method:
 *   minimise c^T x   subject to   S_k(x) = F_k0 + sum_i x_i F_ki >= 0   for many small symmetric blocks,
 * from a strictly feasible x. Source: Boyd and Vandenberghe, "Convex Optimization", 2004, chapter 11; Nesterov and
 * Nemirovskii, "Interior-Point Polynomial Algorithms in Convex Programming", 1994. Newton steps on
 * phi(x) = t c^T x - sum_k log det S_k, exact line search by the eigenvalues of the whitened direction. At a centred
 * point the gap to the optimum is at most theta / t, theta the sum of the block sizes: it is reported only when the
 * Newton decrement says that the point is centred.
 */
import { cholesky, solveLower, solveLowerTransposed, symmetricEigen, whiten } from "../num/dense.js";

export interface Block {
  readonly size: number;
  /** size x size, row-major. */
  readonly constant: Float64Array;
  /** One matrix a variable that enters the block. */
  readonly terms: readonly { readonly variable: number; readonly matrix: Float64Array }[];
}

export interface BarrierResult {
  /** centred: converged to the asked gap. stalled: feasible, but the gap is not proved. infeasibleStart: x0 is not strictly inside. */
  readonly status: "centred" | "stalled" | "infeasibleStart";
  readonly x: Float64Array;
  readonly value: number;
  /** Upper bound of value - optimum; null when the last point is not centred. */
  readonly gap: number | null;
  readonly newtonSteps: number;
}

export interface BarrierOptions {
  /** Stop when theta / t is below this share of 1 + |c^T x|. */
  readonly relativeGap: number;
}

const GROWTH = 12;
const MOST_NEWTON_STEPS = 400;
const STEPS_PER_CENTRE = 60;
const CENTRED = 1e-4;

export function minimise(
  c: Float64Array,
  blocks: readonly Block[],
  start: Float64Array,
  options: BarrierOptions,
): BarrierResult {
  const n = c.length;
  const x = start.slice();
  const theta = blocks.reduce((sum, block) => sum + block.size, 0);
  const value = (): number => c.reduce((sum, ci, i) => sum + ci * x[i]!, 0);
  const finish = (status: BarrierResult["status"], gap: number | null, newtonSteps: number): BarrierResult => ({
    status,
    x,
    value: value(),
    gap,
    newtonSteps,
  });
  const workspaces = blocks.map((block) => blockWorkspace(block));
  if (!workspaces.every((space) => space.moveTo(x))) return finish("infeasibleStart", null, 0);
  let t = theta / (1 + Math.abs(value()));
  let newtonSteps = 0;
  const gradient = new Float64Array(n);
  const hessian = new Float64Array(n * n);
  const factor = new Float64Array(n * n);
  const direction = new Float64Array(n);
  for (;;) {
    let decrement = Number.POSITIVE_INFINITY;
    for (let step = 0; step < STEPS_PER_CENTRE && newtonSteps < MOST_NEWTON_STEPS; step++) {
      newtonSteps++;
      for (let i = 0; i < n; i++) gradient[i] = t * c[i]!;
      hessian.fill(0);
      for (const space of workspaces) space.addDerivatives(gradient, hessian, n);
      if (!solveScaled(hessian, gradient, direction, factor, n)) return finish("stalled", null, newtonSteps);
      decrement = Math.sqrt(Math.max(0, -direction.reduce((sum, di, i) => sum + di * gradient[i]!, 0)));
      if (decrement < CENTRED) break;
      const slope = t * direction.reduce((sum, di, i) => sum + di * c[i]!, 0);
      const length = lineSearch(
        workspaces.flatMap((space) => space.whitenedEigenvalues(direction)),
        slope,
      );
      let shorter = length;
      const from = x.slice();
      const tryStep = (): boolean => {
        for (let i = 0; i < n; i++) x[i] = from[i]! + shorter * direction[i]!;
        return workspaces.every((space) => space.moveTo(x));
      };
      while (!tryStep()) {
        shorter /= 2;
        if (shorter < 1e-12) {
          x.set(from);
          for (const space of workspaces) space.moveTo(x);
          return finish("stalled", null, newtonSteps);
        }
      }
    }
    // |value - optimum| <= (theta + decrement sqrt(theta)) / t near the centre (Nesterov and Nemirovskii, section 3.2)
    const gap = decrement < 0.5 ? (theta + decrement * Math.sqrt(theta)) / t : null;
    if (gap === null || newtonSteps >= MOST_NEWTON_STEPS) return finish("stalled", gap, newtonSteps);
    if (gap <= options.relativeGap * (1 + Math.abs(value()))) return finish("centred", gap, newtonSteps);
    t *= GROWTH;
  }
}

/** One block at the present x: its Cholesky factor and, per variable, the whitened matrix. */
function blockWorkspace({ size, constant, terms }: Block) {
  const square = size * size;
  const S = new Float64Array(square);
  const next = new Float64Array(square);
  const L = new Float64Array(square);
  const row = new Float64Array(size);
  const whitened = terms.map(() => new Float64Array(square));
  const values = new Float64Array(size);
  return {
    moveTo: (x: Float64Array): boolean => {
      next.set(constant);
      for (const { variable, matrix } of terms) {
        const xi = x[variable]!;
        for (let i = 0; i < square; i++) next[i]! += xi * matrix[i]!;
      }
      if (!cholesky(next, S, size)) return false;
      L.set(S);
      return true;
    },
    addDerivatives: (gradient: Float64Array, hessian: Float64Array, n: number): void => {
      terms.forEach(({ variable, matrix }, a) => {
        const wa = whitened[a]!;
        wa.set(matrix);
        whiten(L, wa, size, row);
        let trace = 0;
        for (let i = 0; i < size; i++) trace += wa[i * size + i]!;
        gradient[variable]! -= trace;
      });
      for (let a = 0; a < terms.length; a++) {
        const wa = whitened[a]!;
        const va = terms[a]!.variable;
        for (let b = 0; b <= a; b++) {
          const wb = whitened[b]!;
          const vb = terms[b]!.variable;
          let sum = 0;
          for (let i = 0; i < square; i++) sum += wa[i]! * wb[i]!;
          hessian[va * n + vb]! += sum;
          if (va !== vb) hessian[vb * n + va]! += sum;
        }
      }
    },
    /** Eigenvalues of L^{-1} dS L^{-T}; after addDerivatives at the present x. */
    whitenedEigenvalues: (direction: Float64Array): number[] => {
      next.fill(0);
      for (const [a, { variable }] of terms.entries()) {
        const di = direction[variable]!;
        for (let i = 0; i < square; i++) next[i]! += di * whitened[a]![i]!;
      }
      symmetricEigen(next, size, values, null);
      return Array.from(values);
    },
  };
}

/** The step s > 0 that minimises slope s - sum log(1 + s mu): Newton, kept inside the domain. */
function lineSearch(mu: readonly number[], slope: number): number {
  const least = Math.min(...mu, 0);
  const limit = least < 0 ? -0.999 / least : Number.POSITIVE_INFINITY;
  let s = Math.min(1, limit / 2);
  for (let i = 0; i < 50; i++) {
    let first = slope;
    let second = 0;
    for (const m of mu) {
      const ratio = m / (1 + s * m);
      first -= ratio;
      second += ratio * ratio;
    }
    if (second === 0) return s;
    const moved = Math.min(limit, Math.max(s / 10, s - first / second));
    if (Math.abs(moved - s) < 1e-9 * s) return moved;
    s = moved;
  }
  return s;
}

/** direction = -H^{-1} g with H scaled to a unit diagonal; false when H is not positive definite to rounding. */
function solveScaled(
  H: Float64Array,
  g: Float64Array,
  direction: Float64Array,
  factor: Float64Array,
  n: number,
): boolean {
  const scale = new Float64Array(n);
  for (let i = 0; i < n; i++) scale[i] = 1 / Math.sqrt(H[i * n + i]!);
  const scaled = new Float64Array(n * n);
  for (let i = 0; i < n; i++) for (let j = 0; j < n; j++) scaled[i * n + j] = H[i * n + j]! * scale[i]! * scale[j]!;
  for (let ridge = 0; ridge < 1e-6; ridge = ridge === 0 ? 1e-14 : ridge * 100) {
    for (let i = 0; i < n; i++) scaled[i * n + i] = 1 + ridge;
    if (!cholesky(scaled, factor, n)) continue;
    for (let i = 0; i < n; i++) direction[i] = -g[i]! * scale[i]!;
    solveLower(factor, direction, n);
    solveLowerTransposed(factor, direction, n);
    for (let i = 0; i < n; i++) direction[i]! *= scale[i]!;
    return direction.every(Number.isFinite);
  }
  return false;
}
