/**
 * The contraction condition at one state, in float64. Source: Manchester and Slotine, "Control Contraction Metrics:
 * Convex and Intrinsic Criteria for Nonlinear Feedback Design", IEEE TAC 62(5), 2017, dual form, with the dependence
 * on u kept (no Killing condition).
 *
 *   F(v) = -d_{f+Bv} W - psidot (S W + W S^T) + A(v) W + W A(v)^T,   A(v) = dfdx + sum_j v_j dBdx_j
 *
 * The psidot term is there with a declared rotation only: W is then the body frame's, all at heading zero, S = [[0, -1],
 * [1, 0]] on the position pair, psidot in rad/s. F is affine in v: F(v) = F_0 + sum_j v_j F_j, and the largest
 * eigenvalue is convex, so the 2^m corners of [-1, 1]^m are enough. With T = [P Q], P a basis of null(B^T), Q of
 * range(B):
 *   rate      lambda(z) = -1/2 max_v eigmax(P^T F P, P^T W P)
 *   rho       least rho >= 0 with F + 2 lambda W - rho B B^T <= 0 at every corner; infinite from the rate upwards
 *   density   rho sqrt(eigmax(B^T W^{-1} B)); authority = 1/2 R density in scaled inputs
 *   sigma     sum_i wbar_i sqrt(g_i^T W^{-1} g_i)
 */
import { type ControlAffineModel, newModelPoint } from "../model/controlAffine.js";
import type { DualMetric } from "../nets/dualMetric.js";
import { argMax, cholesky, congruence, rangeAndNull, solveLower, symmetricEigen, whiten } from "../num/dense.js";
import { addProductSymmetric, addSpin } from "./assembly.js";
import { inputCorners } from "./corners.js";

export interface WorstRate {
  /** 1/s. */
  readonly rate: number;
  /** Index into `corners`. */
  readonly corner: number;
}

/** Float64 evaluation at one state after `moveTo`; owns its work space. */
export interface Condition {
  readonly model: ControlAffineModel;
  /** 2^m rows of -1 and 1. */
  readonly corners: readonly Float64Array[];
  /** Evaluates model and metric at the active coordinates; false when W is not positive definite there. */
  moveTo(active: Float64Array): boolean;
  rate(): WorstRate;
  /** Authority density at contraction rate lambda (1/s); Infinity where the condition fails at lambda. */
  authorityDensity(lambda: number): number;
  /** wbar: p, SI of each leftover channel. */
  sigma(wbar: Float64Array): number;
  /** W at the present state, n x n; valid until the next move. */
  readonly W: Float64Array;
  /** F(v) + 2 lambda W at a corner, n x n, newly allocated. */
  conditionMatrix(corner: number, lambda: number): Float64Array;
}

export function condition(model: ControlAffineModel, metric: DualMetric): Condition {
  const { n, m, p } = model;
  const k = n - m;
  const corners = inputCorners(m);
  const point = newModelPoint(n, m, p);
  const z = new Float64Array(n);
  const directions = new Float64Array((m + 1) * n);
  const W = new Float64Array(n * n);
  const dW = new Float64Array((m + 1) * n * n);
  const F = Array.from({ length: m + 1 }, () => new Float64Array(n * n));
  const T = new Float64Array(n * n);
  const P = new Float64Array(n * k);
  const Q = new Float64Array(n * m);
  const rotatedF = F.map(() => new Float64Array(n * n));
  const rotatedW = new Float64Array(n * n);
  const whitenedF = F.map(() => new Float64Array(k * k));
  const cholW = new Float64Array(n * n);
  const cholWp = new Float64Array(k * k);
  const work = new Float64Array(n * n + n * m + n);
  const small = new Float64Array(n * n);
  const values = new Float64Array(n);
  const vector = new Float64Array(n);
  const rangeB = new Float64Array(m * m);
  let inputGain = 0;

  const moveTo = (active: Float64Array): boolean => {
    model.embed(active, z);
    model.evaluate(z, point);
    directions.set(point.f);
    for (let j = 0; j < m; j++) for (let i = 0; i < n; i++) directions[(j + 1) * n + i] = point.B[i * m + j]!;
    metric.evaluate(z, directions, m + 1, W, dW);
    if (!cholesky(W, cholW, n)) return false;
    F.forEach((Fj, j) => {
      for (let i = 0; i < n * n; i++) Fj[i] = -dW[j * n * n + i]!;
      const jacobian = j === 0 ? point.dfdx : point.dBdx.subarray((j - 1) * n * n, j * n * n);
      addProductSymmetric(jacobian, W, Fj, n);
      if (model.rotation !== null) {
        const { heading, headingHalf } = model.rotation;
        addSpin(model.rotation, -headingHalf * directions[j * n + heading]!, W, Fj, n);
      }
    });
    rangeAndNull(point.B, Q, P, n, m, work);
    for (let i = 0; i < n; i++) {
      for (let j = 0; j < k; j++) T[i * n + j] = P[i * k + j]!;
      for (let j = 0; j < m; j++) T[i * n + k + j] = Q[i * m + j]!;
    }
    for (let j = 0; j <= m; j++) congruence(F[j]!, T, rotatedF[j]!, n, n, work);
    congruence(W, T, rotatedW, n, n, work);
    const Wp = small;
    copyBlock(rotatedW, n, Wp, k);
    cholesky(Wp, cholWp, k);
    rotatedF.forEach((Fj, j) => {
      copyBlock(Fj, n, whitenedF[j]!, k);
      whiten(cholWp, whitenedF[j]!, k, vector);
    });
    for (let i = 0; i < m; i++) {
      for (let j = 0; j < m; j++) {
        let sum = 0;
        for (let l = 0; l < n; l++) sum += Q[l * m + i]! * point.B[l * m + j]!;
        rangeB[i * m + j] = sum;
      }
    }
    inputGain = largestInputGain();
    return true;
  };

  /** eigmax(B^T W^{-1} B). */
  const largestInputGain = (): number => {
    if (m === 0) return 0;
    const X = work.subarray(0, n * m);
    for (let j = 0; j < m; j++) {
      for (let i = 0; i < n; i++) vector[i] = point.B[i * m + j]!;
      solveLower(cholW, vector, n);
      for (let i = 0; i < n; i++) X[j * n + i] = vector[i]!;
    }
    for (let a = 0; a < m; a++) {
      for (let b = 0; b < m; b++) {
        let sum = 0;
        for (let i = 0; i < n; i++) sum += X[a * n + i]! * X[b * n + i]!;
        small[a * m + b] = sum;
      }
    }
    symmetricEigen(small, m, values, null);
    return values[argMax(values, m)]!;
  };

  const atCorner = (blocks: readonly Float64Array[], corner: Float64Array, out: Float64Array, size: number): void => {
    out.set(blocks[0]!.subarray(0, size));
    for (let j = 0; j < m; j++) {
      const v = corner[j]!;
      const block = blocks[j + 1]!;
      for (let i = 0; i < size; i++) out[i]! += v * block[i]!;
    }
  };

  const rate = (): WorstRate => {
    let worst = Number.NEGATIVE_INFINITY;
    let at = 0;
    corners.forEach((corner, c) => {
      atCorner(whitenedF, corner, small, k * k);
      symmetricEigen(small, k, values, null);
      const largest = k === 0 ? Number.NEGATIVE_INFINITY : values[argMax(values, k)]!;
      if (largest > worst) {
        worst = largest;
        at = c;
      }
    });
    return { rate: -worst / 2, corner: at };
  };

  const negC = new Float64Array(k * k);
  const cholC = new Float64Array(k * k);
  const S = new Float64Array(m * m);
  const authorityDensity = (lambda: number): number => {
    if (m === 0) return rate().rate > lambda ? 0 : Number.POSITIVE_INFINITY;
    let rho = 0;
    for (const corner of corners) {
      atCorner(rotatedF, corner, small, n * n);
      for (let i = 0; i < n * n; i++) small[i]! += 2 * lambda * rotatedW[i]!;
      for (let i = 0; i < k; i++) for (let j = 0; j < k; j++) negC[i * k + j] = -small[i * n + j]!;
      if (!cholesky(negC, cholC, k)) return Number.POSITIVE_INFINITY;
      // Schur complement: S = Q^T F Q + E^T (-C)^{-1} E with E = P^T F Q
      for (let j = 0; j < m; j++) {
        for (let i = 0; i < k; i++) vector[i] = small[i * n + k + j]!;
        solveLower(cholC, vector, k);
        for (let i = 0; i < k; i++) work[j * k + i] = vector[i]!;
      }
      for (let a = 0; a < m; a++) {
        for (let b = 0; b < m; b++) {
          let sum = small[(k + a) * n + k + b]!;
          for (let i = 0; i < k; i++) sum += work[a * k + i]! * work[b * k + i]!;
          S[a * m + b] = sum;
        }
      }
      rho = Math.max(rho, largestInRange(S));
    }
    return rho * Math.sqrt(inputGain);
  };

  /** eigmax(S, Kb Kb^T) with Kb = Q^T B: the least rho with S - rho Kb Kb^T <= 0. */
  const largestInRange = (s: Float64Array): number => {
    for (let i = 0; i < m; i++) {
      for (let j = 0; j < m; j++) {
        let sum = 0;
        for (let l = 0; l < m; l++) sum += rangeB[i * m + l]! * rangeB[j * m + l]!;
        work[i * m + j] = sum;
      }
    }
    const factor = work.subarray(m * m, 2 * m * m);
    if (!cholesky(work, factor, m)) return Number.POSITIVE_INFINITY;
    whiten(factor, s, m, vector);
    symmetricEigen(s, m, values, null);
    return values[argMax(values, m)]!;
  };

  const sigma = (wbar: Float64Array): number => {
    let sum = 0;
    for (let c = 0; c < p; c++) {
      for (let i = 0; i < n; i++) vector[i] = point.G[i * p + c]!;
      solveLower(cholW, vector, n);
      let square = 0;
      for (let i = 0; i < n; i++) square += vector[i]! ** 2;
      sum += wbar[c]! * Math.sqrt(square);
    }
    return sum;
  };

  const conditionMatrix = (corner: number, lambda: number): Float64Array => {
    const out = new Float64Array(n * n);
    atCorner(F, corners[corner]!, out, n * n);
    for (let i = 0; i < n * n; i++) out[i]! += 2 * lambda * W[i]!;
    return out;
  };

  return { model, corners, moveTo, rate, authorityDensity, sigma, W, conditionMatrix };
}

function copyBlock(from: Float64Array, n: number, to: Float64Array, k: number): void {
  for (let i = 0; i < k; i++) for (let j = 0; j < k; j++) to[i * k + j] = from[i * n + j]!;
}
