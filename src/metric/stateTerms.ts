/**
 * The learner's terms at one state and their exact gradients in W and its tangents: with the extremal vector held
 * fixed, the value's derivative is the derivative of a quadratic form (Danskin; Magnus, "On differentiating eigenvalues
 * and eigenvectors", Econometric Theory 1(2), 1985), so no eigen-solver is differentiated.
 *
 *   F(v) = -D(v) + K W + W K^T,  K = A(v) - psidot(v) S + lambda I,  D(v) = dW_f + sum_j v_j dW_bj
 *   y^T F y has the gradient  k y^T + y k^T (k = K^T y) in W  and  -v_j y y^T in dW_j (v_0 = 1).
 *
 * Written apart from the verifier on purpose: two implementations, one truth (test/metric/agreement.test.ts).
 */
import type { BodyFrame } from "../model/controlAffine.js";
import { argMax, bilinear, cholesky, solveLower, solveLowerTransposed, symmetricEigen, whiten } from "../num/dense.js";
import type { TrainingState } from "./trainingState.js";

/** Adjoints of a scalar in W (n x n) and in each of the m+1 tangents; symmetric. */
export interface MetricAdjoint {
  readonly W: Float64Array;
  readonly tangents: readonly Float64Array[];
}

export interface StateTerms {
  /** Loads W and its m+1 tangents at a state; false when W is not positive definite. */
  load(state: TrainingState, W: Float64Array, tangents: readonly Float64Array[]): boolean;
  /** F(v) at a corner, n x n, newly allocated. */
  conditionMatrix(corner: number, lambda: number): Float64Array;
  /** Pointwise contraction rate, 1/s. */
  rate(): number;
  /** adjoint += weight * d rate; after rate(). */
  addRateGradient(weight: number, adjoint: MetricAdjoint): void;
  sigma(wbar: Float64Array): number;
  addSigmaGradient(weight: number, wbar: Float64Array, adjoint: MetricAdjoint): void;
  /** Authority density at lambda; Infinity where the condition fails. */
  density(lambda: number): number;
  /** adjoint += weight * d log density; returns d log density / d lambda; after a finite, positive density(). */
  addLogDensityGradient(weight: number, adjoint: MetricAdjoint): number;
}

export function stateTerms(
  n: number,
  m: number,
  frame: BodyFrame | null,
  corners: readonly Float64Array[],
): StateTerms {
  const k = n - m;
  const mat = (rows: number, cols: number): Float64Array => new Float64Array(rows * cols);
  const cholW = mat(n, n);
  const F = mat(n, n);
  const K = mat(n, n);
  const cholWp = mat(k, k);
  const block = mat(k, k);
  const eigenvalues = new Float64Array(n);
  const eigenvectors = mat(n, n);
  const row = new Float64Array(n);
  const PW = mat(k, k);
  let state!: TrainingState;
  let W!: Float64Array;
  let tangents!: readonly Float64Array[];
  let rateCorner = 0;
  let rateValue = 0;
  const rateVector = new Float64Array(n);
  let densityCorner = 0;
  let densityRate = 0;
  let rho = 0;
  const densityVector = new Float64Array(n);

  const load: StateTerms["load"] = (nextState, nextW, nextTangents) => {
    state = nextState;
    W = nextW;
    tangents = nextTangents;
    return cholesky(W, cholW, n);
  };

  /** K(v) = A(v) - psidot S + lambda I at a corner. */
  const closedJacobian = (corner: Float64Array, lambda: number): void => {
    const { dfdx, dBdx } = state.point;
    for (let i = 0; i < n * n; i++) {
      let sum = dfdx[i]!;
      for (let j = 0; j < m; j++) sum += corner[j]! * dBdx[j * n * n + i]!;
      K[i] = sum;
    }
    for (let i = 0; i < n; i++) K[i * n + i]! += lambda;
    if (frame === null) return;
    const [a, b] = frame.position;
    const psidot = spinAt(corner);
    K[b * n + a]! -= psidot;
    K[a * n + b]! += psidot;
  };

  const spinAt = (corner: Float64Array): number => {
    let sum = state.spin[0]!;
    for (let j = 0; j < m; j++) sum += corner[j]! * state.spin[j + 1]!;
    return sum;
  };

  const assemble = (corner: Float64Array, lambda: number): void => {
    closedJacobian(corner, lambda);
    for (let i = 0; i < n; i++) {
      for (let j = 0; j <= i; j++) {
        let sum = -tangents[0]![i * n + j]!;
        for (let c = 0; c < m; c++) sum -= corner[c]! * tangents[c + 1]![i * n + j]!;
        for (let l = 0; l < n; l++) sum += K[i * n + l]! * W[l * n + j]! + W[i * n + l]! * K[j * n + l]!;
        F[i * n + j] = F[j * n + i] = sum;
      }
    }
  };

  /** out (a x b) = left^T F right for left (n x a), right (n x b). */
  const project = (
    S: Float64Array,
    left: Float64Array,
    a: number,
    right: Float64Array,
    b: number,
    out: Float64Array,
  ): void => {
    for (let j = 0; j < b; j++) {
      for (let i = 0; i < n; i++) {
        let sum = 0;
        for (let l = 0; l < n; l++) sum += S[i * n + l]! * right[l * b + j]!;
        row[i] = sum;
      }
      for (let i = 0; i < a; i++) {
        let sum = 0;
        for (let l = 0; l < n; l++) sum += left[l * a + i]! * row[l]!;
        out[i * b + j] = sum;
      }
    }
  };

  const rate = (): number => {
    const P = state.nullspace;
    project(W, P, k, P, k, PW);
    cholesky(PW, cholWp, k);
    let worst = Number.NEGATIVE_INFINITY;
    corners.forEach((corner, c) => {
      assemble(corner, 0);
      project(F, P, k, P, k, block);
      whiten(cholWp, block, k, row);
      symmetricEigen(block, k, eigenvalues, eigenvectors);
      const top = argMax(eigenvalues, k);
      if (eigenvalues[top]! <= worst) return;
      worst = eigenvalues[top]!;
      rateCorner = c;
      for (let i = 0; i < k; i++) row[i] = eigenvectors[i * k + top]!;
      solveLowerTransposed(cholWp, row, k);
      for (let i = 0; i < n; i++) {
        let sum = 0;
        for (let j = 0; j < k; j++) sum += P[i * k + j]! * row[j]!;
        rateVector[i] = sum;
      }
    });
    rateValue = -worst / 2;
    return rateValue;
  };

  /** adjoint += weight * d(y^T F y) at a corner and rate lambda. */
  const addQuadraticGradient = (
    y: Float64Array,
    corner: Float64Array,
    lambda: number,
    weight: number,
    adjoint: MetricAdjoint,
  ): void => {
    closedJacobian(corner, lambda);
    for (let i = 0; i < n; i++) {
      let sum = 0;
      for (let l = 0; l < n; l++) sum += K[l * n + i]! * y[l]!;
      row[i] = sum;
    }
    for (let i = 0; i < n; i++) {
      for (let j = 0; j < n; j++) {
        adjoint.W[i * n + j]! += weight * (row[i]! * y[j]! + y[i]! * row[j]!);
        const yy = weight * y[i]! * y[j]!;
        adjoint.tangents[0]![i * n + j]! -= yy;
        for (let c = 0; c < m; c++) adjoint.tangents[c + 1]![i * n + j]! -= corner[c]! * yy;
      }
    }
  };

  /** q = W^{-1} g in place. */
  const applyInverse = (g: Float64Array): void => {
    solveLower(cholW, g, n);
    solveLowerTransposed(cholW, g, n);
  };

  const addOuter = (q: Float64Array, weight: number, adjoint: MetricAdjoint): void => {
    for (let i = 0; i < n; i++) for (let j = 0; j < n; j++) adjoint.W[i * n + j]! += weight * q[i]! * q[j]!;
  };

  const column = (matrix: Float64Array, cols: number, c: number, out: Float64Array): void => {
    for (let i = 0; i < n; i++) out[i] = matrix[i * cols + c]!;
  };

  const q = new Float64Array(n);
  const g = new Float64Array(n);
  const forEachChannel = (wbar: Float64Array, visit: (norm: number, wbar: number) => void): void => {
    for (let c = 0; c < wbar.length; c++) {
      column(state.point.G, wbar.length, c, g);
      q.set(g);
      applyInverse(q);
      let square = 0;
      for (let i = 0; i < n; i++) square += g[i]! * q[i]!;
      visit(Math.sqrt(square), wbar[c]!);
    }
  };

  const sigma = (wbar: Float64Array): number => {
    let sum = 0;
    forEachChannel(wbar, (norm, bound) => {
      sum += bound * norm;
    });
    return sum;
  };

  const addSigmaGradient: StateTerms["addSigmaGradient"] = (weight, wbar, adjoint) => {
    forEachChannel(wbar, (norm, bound) => {
      if (norm > 0) addOuter(q, (-weight * bound) / (2 * norm), adjoint);
    });
  };

  const E = mat(k, m);
  const X = mat(k, m);
  const S = mat(m, m);
  const gain = mat(m, m);
  const cholGain = mat(m, m);
  const cholC = mat(k, k);
  const zeta = new Float64Array(m);
  const density = (lambda: number): number => {
    const { nullspace: P, range: Q, point } = state;
    rho = 0;
    for (let a = 0; a < m; a++) {
      for (let b = 0; b < m; b++) {
        let sum = 0;
        for (let c = 0; c < m; c++) {
          let qa = 0;
          let qb = 0;
          for (let i = 0; i < n; i++) {
            qa += Q[i * m + a]! * point.B[i * m + c]!;
            qb += Q[i * m + b]! * point.B[i * m + c]!;
          }
          sum += qa * qb;
        }
        gain[a * m + b] = sum;
      }
    }
    cholesky(gain, cholGain, m);
    for (let c = 0; c < corners.length; c++) {
      assemble(corners[c]!, lambda);
      project(F, P, k, P, k, block);
      for (let i = 0; i < k * k; i++) block[i] = -block[i]!;
      if (!cholesky(block, cholC, k)) return Number.POSITIVE_INFINITY;
      project(F, P, k, Q, m, E);
      project(F, Q, m, Q, m, S);
      for (let j = 0; j < m; j++) {
        for (let i = 0; i < k; i++) row[i] = E[i * m + j]!;
        solveLower(cholC, row, k);
        solveLowerTransposed(cholC, row, k);
        for (let i = 0; i < k; i++) X[i * m + j] = row[i]!;
      }
      for (let a = 0; a < m; a++) {
        for (let b = 0; b < m; b++) for (let i = 0; i < k; i++) S[a * m + b]! += E[i * m + a]! * X[i * m + b]!;
      }
      whiten(cholGain, S, m, row);
      symmetricEigen(S, m, eigenvalues, eigenvectors);
      const top = argMax(eigenvalues, m);
      if (eigenvalues[top]! <= rho) continue;
      rho = eigenvalues[top]!;
      densityCorner = c;
      for (let i = 0; i < m; i++) zeta[i] = eigenvectors[i * m + top]!;
      solveLowerTransposed(cholGain, zeta, m);
      for (let i = 0; i < n; i++) {
        let sum = 0;
        for (let j = 0; j < m; j++) sum += Q[i * m + j]! * zeta[j]!;
        for (let l = 0; l < k; l++) {
          let x = 0;
          for (let j = 0; j < m; j++) x += X[l * m + j]! * zeta[j]!;
          sum += P[i * k + l]! * x;
        }
        densityVector[i] = sum;
      }
    }
    densityRate = lambda;
    return rho * Math.sqrt(largestGain());
  };

  const gainVector = new Float64Array(n);
  /** eigmax(B^T W^{-1} B); leaves W^{-1} B s in gainVector, s its unit eigenvector. */
  const largestGain = (): number => {
    const { B } = state.point;
    for (let b = 0; b < m; b++) {
      column(B, m, b, q);
      applyInverse(q);
      for (let a = 0; a < m; a++) {
        let sum = 0;
        for (let i = 0; i < n; i++) sum += B[i * m + a]! * q[i]!;
        S[a * m + b] = sum;
      }
    }
    symmetricEigen(S, m, eigenvalues, eigenvectors);
    const top = argMax(eigenvalues, m);
    for (let i = 0; i < n; i++) {
      let sum = 0;
      for (let j = 0; j < m; j++) sum += B[i * m + j]! * eigenvectors[j * m + top]!;
      gainVector[i] = sum;
    }
    applyInverse(gainVector);
    return eigenvalues[top]!;
  };

  const addLogDensityGradient: StateTerms["addLogDensityGradient"] = (weight, adjoint) => {
    let effect = 0;
    for (let c = 0; c < m; c++) {
      let dot = 0;
      for (let i = 0; i < n; i++) dot += state.point.B[i * m + c]! * densityVector[i]!;
      effect += dot * dot;
    }
    const scale = 1 / (effect * rho);
    addQuadraticGradient(densityVector, corners[densityCorner]!, densityRate, weight * scale, adjoint);
    const e = largestGain();
    addOuter(gainVector, -weight / (2 * e), adjoint);
    return 2 * bilinear(W, densityVector, densityVector, n) * scale;
  };

  return {
    load,
    rate,
    sigma,
    addSigmaGradient,
    density,
    addLogDensityGradient,
    addRateGradient: (weight, adjoint) =>
      addQuadraticGradient(rateVector, corners[rateCorner]!, rateValue, -weight / 2, adjoint),
    conditionMatrix: (corner, lambda) => {
      assemble(corners[corner]!, lambda);
      return F.slice();
    },
  };
}
