/**
 * Energy of a path in the metric M = W^{-1} and its gradient. The path is a polynomial of degree N through values at the
 * Chebyshev points; the energy E = integral of x_s^T M(x) x_s ds by Clenshaw-Curtis (chebyshev.ts).
 *
 * Exact reduction under symmetry. Order the states as (q, c), W varying with q only. For a given q(s) the best c(s) has a
 * constant momentum p = (M x_s)_c (Noether), and everything about c follows from q (routhian reduction: Goldstein, Poole,
 * Safko, "Classical Mechanics", 3rd ed., 2002, section 8.3). With X = W_qq^{-1} W_qc and S = W_cc - W_cq X:
 *   p  = (integral S)^{-1} (c(1) - c(0) - integral X^T q_s)
 *   E  = integral q_s^T W_qq^{-1} q_s + p^T (integral S) p
 *   momentum y = M x_s = (W_qq^{-1} q_s - X p, p),   x_s = W y
 *   dE = integral 2 y_q^T dq_s - y^T dW y            (p held: it is stationary)
 * Only q is unknown: n_q (N - 1) numbers, none when W is constant (the path is then straight).
 */
import { cholesky, solveLower, solveLowerTransposed } from "../num/dense.js";
import type { Chebyshev } from "./chebyshev.js";
import type { WorldMetric } from "./worldMetric.js";

export interface PathEnergy {
  /** Unknowns: (N - 1) x n_q, at the inner points. */
  readonly unknowns: number;
  /** Sets the ends (n each); false when W is not positive definite at one. */
  setEnds(from: Float64Array, to: Float64Array): boolean;
  /**
   * E for the inner values q - q(0) (unknowns), its gradient into gradient (unknowns), and `momenta`; Infinity, with the
   * gradient unset, when W is not positive definite at an inner point.
   */
  evaluate(inner: Float64Array, gradient: Float64Array): number;
  /**
   * 1/2 dE/dx(0) and 1/2 dE/dx(1) (n each) of the last evaluation, the path carried with its ends: inner values move by
   * (1 - s) dx(0) + s dx(1), the bend away from the straight line held.
   */
  endSlopes(start: Float64Array, end: Float64Array): void;
  /** n each, y = M x_s at every point, of the last evaluation; y^T W y is the squared speed there. */
  readonly momenta: readonly Float64Array[];
  /** W (n x n) at every point, of the last evaluation. */
  readonly W: readonly Float64Array[];
  /** n_q, q(1) - q(0). */
  readonly gap: Float64Array;
}

export function pathEnergy(metric: WorldMetric, { degree, points, weights, derivative }: Chebyshev): PathEnergy {
  const { n, varying, cyclic } = metric;
  const nq = varying.length;
  const nc = cyclic.length;
  const size = degree + 1;
  const perNode = (length: number): Float64Array[] => Array.from({ length: size }, () => new Float64Array(length));
  const z = perNode(n);
  const W = perNode(n * n);
  const dW = perNode(nq * n * n);
  const factor = perNode(nq * nq);
  const columns = Array.from({ length: size }, () => Array.from({ length: nc }, () => new Float64Array(nq)));
  const slope = perNode(nq);
  const solved = perNode(nq);
  const momenta = perNode(n);
  const Wqq = new Float64Array(nq * nq);
  const sumS = new Float64Array(nc * nc);
  const factorS = new Float64Array(nc * nc);
  const p = new Float64Array(nc);
  const rest = new Float64Array(nc);
  const start = new Float64Array(nq);
  const gap = new Float64Array(nq);
  const gapCyclic = new Float64Array(nc);

  /** Factor of W_qq and the columns of X at point k. */
  const factorise = (k: number): boolean => {
    const Wk = W[k]!;
    for (let i = 0; i < nq; i++) for (let j = 0; j < nq; j++) Wqq[i * nq + j] = Wk[varying[i]! * n + varying[j]!]!;
    if (!cholesky(Wqq, factor[k]!, nq)) return false;
    for (let c = 0; c < nc; c++) {
      const X = columns[k]![c]!;
      for (let i = 0; i < nq; i++) X[i] = Wk[varying[i]! * n + cyclic[c]!]!;
      solveLower(factor[k]!, X, nq);
      solveLowerTransposed(factor[k]!, X, nq);
    }
    return true;
  };

  const setEnds = (from: Float64Array, to: Float64Array): boolean => {
    for (let i = 0; i < nq; i++) {
      start[i] = from[varying[i]!]!;
      gap[i] = to[varying[i]!]! - start[i]!;
    }
    for (let c = 0; c < nc; c++) gapCyclic[c] = to[cyclic[c]!]! - from[cyclic[c]!]!;
    z[0]!.set(from);
    z[degree]!.set(to);
    for (let k = 1; k < degree; k++) z[k]!.set(from);
    metric.evaluate(z[0]!, W[0]!, dW[0]!);
    metric.evaluate(z[degree]!, W[degree]!, dW[degree]!);
    return factorise(0) && factorise(degree);
  };

  /** q_s at point k into slope, W_qq^{-1} q_s into solved; returns q_s^T W_qq^{-1} q_s. */
  const differentiate = (k: number, inner: Float64Array): number => {
    const qs = slope[k]!;
    const y = solved[k]!;
    for (let i = 0; i < nq; i++) {
      let sum = derivative[k * size + degree]! * gap[i]!;
      for (let j = 1; j < degree; j++) sum += derivative[k * size + j]! * inner[(j - 1) * nq + i]!;
      qs[i] = y[i] = sum;
    }
    solveLower(factor[k]!, y, nq);
    let square = 0;
    for (let i = 0; i < nq; i++) square += y[i]! * y[i]!;
    solveLowerTransposed(factor[k]!, y, nq);
    return square;
  };

  /** Adds point k to the integrals of S and X^T q_s. */
  const accumulate = (k: number): void => {
    const w = weights[k]!;
    const Wk = W[k]!;
    for (let c = 0; c < nc; c++) {
      const row = cyclic[c]! * n;
      const X = columns[k]![c]!;
      let moved = 0;
      for (let i = 0; i < nq; i++) moved += X[i]! * slope[k]![i]!;
      rest[c]! -= w * moved;
      for (let d = 0; d <= c; d++) {
        let s = Wk[row + cyclic[d]!]!;
        for (let i = 0; i < nq; i++) s -= X[i]! * Wk[varying[i]! * n + cyclic[d]!]!;
        sumS[c * nc + d]! += w * s;
      }
    }
  };

  const evaluate = (inner: Float64Array, gradient: Float64Array): number => {
    for (let k = 1; k < degree; k++) {
      for (let i = 0; i < nq; i++) z[k]![varying[i]!] = start[i]! + inner[(k - 1) * nq + i]!;
      metric.evaluate(z[k]!, W[k]!, dW[k]!);
      if (!factorise(k)) return Number.POSITIVE_INFINITY;
    }
    let energy = 0;
    sumS.fill(0);
    rest.set(gapCyclic);
    for (let k = 0; k < size; k++) {
      energy += weights[k]! * differentiate(k, inner);
      accumulate(k);
    }
    for (let c = 0; c < nc; c++) for (let d = 0; d < c; d++) sumS[d * nc + c] = sumS[c * nc + d]!;
    if (!cholesky(sumS, factorS, nc)) return Number.POSITIVE_INFINITY;
    p.set(rest);
    solveLower(factorS, p, nc);
    solveLowerTransposed(factorS, p, nc);
    for (let c = 0; c < nc; c++) energy += p[c]! * rest[c]!;
    for (let k = 0; k < size; k++) setMomentum(k);
    setGradient(gradient);
    return energy;
  };

  const setMomentum = (k: number): void => {
    const y = momenta[k]!;
    for (let c = 0; c < nc; c++) y[cyclic[c]!] = p[c]!;
    for (let i = 0; i < nq; i++) {
      let value = solved[k]![i]!;
      for (let c = 0; c < nc; c++) value -= columns[k]![c]![i]! * p[c]!;
      y[varying[i]!] = value;
    }
  };

  /** dE/dq_i at point j, all other points held. */
  const slopeAt = (j: number, i: number): number => {
    const y = momenta[j]!;
    const dWj = dW[j]!;
    let sum = 0;
    for (let k = 0; k < size; k++) sum += 2 * weights[k]! * derivative[k * size + j]! * momenta[k]![varying[i]!]!;
    let turning = 0;
    for (let r = 0, at = i * n * n; r < n; r++) {
      let row = 0;
      for (let s = 0; s < n; s++, at++) row += dWj[at]! * y[s]!;
      turning += y[r]! * row;
    }
    return sum - weights[j]! * turning;
  };

  const setGradient = (gradient: Float64Array): void => {
    for (let j = 1; j < degree; j++) for (let i = 0; i < nq; i++) gradient[(j - 1) * nq + i] = slopeAt(j, i);
  };

  const endSlopes = (first: Float64Array, last: Float64Array): void => {
    for (let c = 0; c < nc; c++) {
      first[cyclic[c]!] = -p[c]!;
      last[cyclic[c]!] = p[c]!;
    }
    for (let i = 0; i < nq; i++) {
      let start = slopeAt(0, i);
      let end = slopeAt(degree, i);
      for (let j = 1; j < degree; j++) {
        const slope = slopeAt(j, i);
        start += (1 - points[j]!) * slope;
        end += points[j]! * slope;
      }
      first[varying[i]!] = start / 2;
      last[varying[i]!] = end / 2;
    }
  };

  return { unknowns: nq * (degree - 1), setEnds, evaluate, endSlopes, momenta, W, gap };
}
