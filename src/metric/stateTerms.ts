/**
 * The learner's terms at one state and their exact gradients in W and its tangents: with the extremal vector held
 * fixed, the value's derivative is the derivative of a quadratic form (Danskin; Magnus, "On differentiating eigenvalues
 * and eigenvectors", Econometric Theory 1(2), 1985), so no eigen-solver is differentiated.
 *
 *   F(v) = -D(v) + K W + W K^T,  K = A(v) - psidot(v) S + lambda I,  D(v) = dW_f + sum_j v_j dW_bj
 *   excess(lambda, rho) = max_v eigmax(F(v) - rho B B^T, W): the condition holds at lambda with gain rho where it is <= 0
 *   y^T F y has the gradient  k y^T + y k^T (k = K^T y) in W  and  -v_j y y^T in dW_j (v_0 = 1).
 *
 * Written apart from the verifier on purpose: two implementations, one truth (test/metric/agreement.test.ts).
 */
import type { BodyFrame } from "../model/controlAffine.js";
import { argMax, cholesky, solveLower, solveLowerTransposed, symmetricEigen, whiten } from "../num/dense.js";
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
  /** 1/s; positive where the condition fails at lambda with gain rho. */
  excess(lambda: number, rho: number): number;
  /** adjoint += weight * d excess; returns d excess / d lambda and d excess / d rho; after excess(). */
  addExcessGradient(weight: number, adjoint: MetricAdjoint): { readonly lambda: number; readonly rho: number };
  /** wbar_c sqrt(g_c^T W^{-1} g_c) of each leftover channel into out (p). */
  pushes(wbar: Float64Array, out: Float64Array): void;
  /** adjoint += sum_c weights_c * d push_c. */
  addPushGradient(weights: Float64Array, wbar: Float64Array, adjoint: MetricAdjoint): void;
  /** eigmax(B^T W^{-1} B). */
  inputGain(): number;
  /** adjoint += weight * d inputGain; after inputGain(). */
  addInputGainGradient(weight: number, adjoint: MetricAdjoint): void;
}

export function stateTerms(
  n: number,
  m: number,
  frame: BodyFrame | null,
  corners: readonly Float64Array[],
): StateTerms {
  const mat = (rows: number, cols: number): Float64Array => new Float64Array(rows * cols);
  const cholW = mat(n, n);
  const F = mat(n, n);
  const K = mat(n, n);
  const whitened = mat(n, n);
  const eigenvalues = new Float64Array(n);
  const eigenvectors = mat(n, n);
  const row = new Float64Array(n);
  let state!: TrainingState;
  let W!: Float64Array;
  let tangents!: readonly Float64Array[];
  const worst = { corner: 0, lambda: 0, value: 0, vector: new Float64Array(n) };

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

  /** B^T y squared, summed over the inputs. */
  const inputEffect = (y: Float64Array): number => {
    let effect = 0;
    for (let c = 0; c < m; c++) {
      let dot = 0;
      for (let i = 0; i < n; i++) dot += state.point.B[i * m + c]! * y[i]!;
      effect += dot * dot;
    }
    return effect;
  };

  const excess = (lambda: number, rho: number): number => {
    const { B } = state.point;
    worst.lambda = lambda;
    worst.value = Number.NEGATIVE_INFINITY;
    for (let c = 0; c < corners.length; c++) {
      assemble(corners[c]!, lambda);
      for (let i = 0; i < n; i++) {
        for (let j = 0; j < n; j++) {
          let sum = F[i * n + j]!;
          for (let l = 0; l < m; l++) sum -= rho * B[i * m + l]! * B[j * m + l]!;
          whitened[i * n + j] = sum;
        }
      }
      whiten(cholW, whitened, n, row);
      symmetricEigen(whitened, n, eigenvalues, eigenvectors);
      const top = argMax(eigenvalues, n);
      if (eigenvalues[top]! <= worst.value) continue;
      worst.value = eigenvalues[top]!;
      worst.corner = c;
      for (let i = 0; i < n; i++) worst.vector[i] = eigenvectors[i * n + top]!;
      solveLowerTransposed(cholW, worst.vector, n);
    }
    return worst.value;
  };

  const addExcessGradient: StateTerms["addExcessGradient"] = (weight, adjoint) => {
    // the vector has y^T W y = 1, so the pencil's eigenvalue moves as y^T dF y - value * y^T dW y
    addQuadraticGradient(worst.vector, corners[worst.corner]!, worst.lambda - worst.value / 2, weight, adjoint);
    return { lambda: 2, rho: -inputEffect(worst.vector) };
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
  const forEachChannel = (wbar: Float64Array, visit: (norm: number, wbar: number, channel: number) => void): void => {
    for (let c = 0; c < wbar.length; c++) {
      column(state.point.G, wbar.length, c, g);
      q.set(g);
      applyInverse(q);
      let square = 0;
      for (let i = 0; i < n; i++) square += g[i]! * q[i]!;
      visit(Math.sqrt(square), wbar[c]!, c);
    }
  };

  const pushes: StateTerms["pushes"] = (wbar, out) => {
    forEachChannel(wbar, (norm, bound, channel) => {
      out[channel] = bound * norm;
    });
  };

  const addPushGradient: StateTerms["addPushGradient"] = (weights, wbar, adjoint) => {
    forEachChannel(wbar, (norm, bound, channel) => {
      if (norm > 0) addOuter(q, (-weights[channel]! * bound) / (2 * norm), adjoint);
    });
  };

  const S = mat(m, m);
  const gainVector = new Float64Array(n);
  /** eigmax(B^T W^{-1} B); leaves W^{-1} B s in gainVector, s its unit eigenvector. */
  const inputGain = (): number => {
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

  return {
    load,
    excess,
    addExcessGradient,
    pushes,
    addPushGradient,
    inputGain,
    addInputGainGradient: (weight, adjoint) => addOuter(gainVector, -weight, adjoint),
    conditionMatrix: (corner, lambda) => {
      assemble(corners[corner]!, lambda);
      return F.slice();
    },
  };
}
