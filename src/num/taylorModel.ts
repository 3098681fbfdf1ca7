/**
 * Taylor models of degree 2 over a cell: a quadratic polynomial with float64 coefficients and a bound of all that it
 * leaves out, rounding included. Source: Makino and Berz, "Taylor models and other validated functional inclusion
 * methods", Int. J. Pure Appl. Math. 4(4), 2003; the remainder here is one symmetric bound.
 *
 * A cell is centre + radius t, t in [-1, 1]^d. The model at offset o of an array, `size` = 2 + d + d(d+1)/2 numbers,
 *   c, g_0 .. g_{d-1}, q_00, q_01, .. q_0{d-1}, q_11, .., e
 * claims for every t:  | value - c - sum_i g_i t_i - sum_{i<=j} q_ij t_i t_j | <= e.
 *
 * Rounding (Higham, "Accuracy and Stability of Numerical Algorithms", 2nd ed., 2002, section 3.1): a coefficient that is a
 * sum of N products of float64 is off by at most gamma_{N+2} times the sum of their sizes, and |monomial| <= 1, so
 * (N + 12) u times the sum of all sizes, added to e, covers every coefficient of the result (12: products are scaled once
 * more, and four products make one coefficient). e itself is a sum of fewer than 2000 terms that are not negative,
 * rounded to nearest: GROW = 1 + 2^-41 makes it an upper bound. TINY covers underflow. d = 0 is a point with its error.
 */
import { U } from "./directed.js";

export const GROW = 1 + 2 ** -41;
export const TINY = 1e-290;

/** A sum of scaled models and scaled products of two models; offsets into the array. */
export interface SumOfProducts {
  readonly constant: number;
  readonly linear: readonly { readonly weight: number; readonly of: number }[];
  readonly products: readonly { readonly weight: number; readonly left: number; readonly right: number }[];
}

/**
 * Second-order expansion of a function about the model's c, for arguments within `spread` of it:
 *   phi(c + s) = value + slope s + half s^2 + phi'''(xi) s^3 / 6,  |phi'''(xi) - third| <= thirdError.
 * value, slope and half are float64 numbers off by at most the errors.
 */
export interface Expansion {
  value: number;
  slope: number;
  half: number;
  third: number;
  thirdError: number;
  valueError: number;
  slopeError: number;
  halfError: number;
}

export interface TaylorKernel {
  readonly d: number;
  readonly size: number;
  /** Position of q_ij (i <= j) in a model. */
  readonly quadratic: (i: number, j: number) => number;
  sum(M: Float64Array, terms: SumOfProducts, out: number): void;
  product(M: Float64Array, left: number, right: number, out: number): void;
  /** Bound of |value - c|. */
  spread(M: Float64Array, a: number): number;
  compose(M: Float64Array, a: number, spread: number, phi: Expansion, out: number): void;
  /** Upper bound of the model over the cell. */
  upper(M: Float64Array, a: number): number;
  lower(M: Float64Array, a: number): number;
}

export function taylorKernel(d: number): TaylorKernel {
  const first = 1;
  const second = 1 + d;
  const rest = 1 + d + (d * (d + 1)) / 2;
  const size = rest + 1;

  const sum = (M: Float64Array, terms: SumOfProducts, out: number): void => {
    const { constant, linear, products } = terms;
    for (let k = 0; k < rest; k++) M[out + k] = 0;
    M[out] = constant;
    let absolute = Math.abs(constant);
    let error = 0;
    for (let t = 0; t < linear.length; t++) {
      const { weight: w, of } = linear[t]!;
      for (let k = 0; k < rest; k++) {
        const value = w * M[of + k]!;
        M[out + k]! += value;
        absolute += Math.abs(value);
      }
      error += Math.abs(w) * M[of + rest]!;
    }
    for (let t = 0; t < products.length; t++) {
      const { weight: w, left: a, right: b } = products[t]!;
      const a0 = w * M[a]!;
      const b0 = M[b]!;
      M[out]! += a0 * b0;
      let aLinear = 0;
      let bLinear = 0;
      let aQuadratic = 0;
      let bQuadratic = 0;
      let k = second;
      for (let i = 0; i < d; i++) {
        const ai = w * M[a + first + i]!;
        const bi = M[b + first + i]!;
        aLinear += Math.abs(ai);
        bLinear += Math.abs(bi);
        M[out + first + i]! += a0 * bi + b0 * ai;
        M[out + k]! += ai * bi;
        for (let j = i; j < d; j++, k++) {
          const aq = w * M[a + k]!;
          const bq = M[b + k]!;
          aQuadratic += Math.abs(aq);
          bQuadratic += Math.abs(bq);
          M[out + k]! += a0 * bq + b0 * aq;
          if (j > i) M[out + k]! += ai * M[b + first + j]! + w * M[a + first + j]! * bi;
        }
      }
      const aSize = Math.abs(a0) + aLinear + aQuadratic;
      const bSize = Math.abs(b0) + bLinear + bQuadratic;
      const ae = Math.abs(w) * M[a + rest]!;
      const be = M[b + rest]!;
      error += aLinear * bQuadratic + aQuadratic * (bLinear + bQuadratic) + ae * (bSize + be) + be * aSize;
      absolute += aSize * bSize;
    }
    M[out + rest] = (error + (linear.length + 4 * products.length + 12) * U * absolute) * GROW + TINY;
  };

  const product = (M: Float64Array, a: number, b: number, out: number): void => {
    const a0 = M[a]!;
    const b0 = M[b]!;
    let aLinear = 0;
    let bLinear = 0;
    let aQuadratic = 0;
    let bQuadratic = 0;
    M[out] = a0 * b0;
    let k = second;
    for (let i = 0; i < d; i++) {
      const ai = M[a + first + i]!;
      const bi = M[b + first + i]!;
      aLinear += Math.abs(ai);
      bLinear += Math.abs(bi);
      M[out + first + i] = a0 * bi + b0 * ai;
      for (let j = i; j < d; j++, k++) {
        const aq = M[a + k]!;
        const bq = M[b + k]!;
        aQuadratic += Math.abs(aq);
        bQuadratic += Math.abs(bq);
        M[out + k] = a0 * bq + b0 * aq + (j > i ? ai * M[b + first + j]! + M[a + first + j]! * bi : ai * bi);
      }
    }
    const aSize = Math.abs(a0) + aLinear + aQuadratic;
    const bSize = Math.abs(b0) + bLinear + bQuadratic;
    const ae = M[a + rest]!;
    const be = M[b + rest]!;
    const left = aLinear * bQuadratic + aQuadratic * (bLinear + bQuadratic) + ae * (bSize + be) + be * aSize;
    M[out + rest] = (left + 12 * U * aSize * bSize) * GROW + TINY;
  };

  const spread = (M: Float64Array, a: number): number => {
    let total = M[a + rest]!;
    for (let k = first; k < rest; k++) total += Math.abs(M[a + k]!);
    return total * GROW + TINY;
  };

  /**
   * With s = l + q + eps (linear, quadratic part, error), |s| <= S: s^3 = (3/4) S^2 s + rest of size <= S^3 / 4, the
   * Chebyshev polynomial of degree 3, so third/6 s^3 goes into the slope but for third S^3 / 24.
   */
  const compose = (M: Float64Array, a: number, S: number, phi: Expansion, out: number): void => {
    const { value, half } = phi;
    const slope = phi.slope + (phi.third * S * S) / 8;
    const size = Math.abs(slope);
    let linear = 0;
    let quadratic = 0;
    let k = second;
    for (let i = 0; i < d; i++) linear += Math.abs(M[a + first + i]!);
    for (; k < rest; k++) quadratic += Math.abs(M[a + k]!);
    const ae = M[a + rest]!;
    M[out] = value;
    k = second;
    for (let i = 0; i < d; i++) {
      const ai = M[a + first + i]!;
      M[out + first + i] = slope * ai;
      for (let j = i; j < d; j++, k++) {
        const square = j > i ? 2 * ai * M[a + first + j]! : ai * ai;
        M[out + k] = slope * M[a + k]! + half * square;
      }
    }
    const dropped = 2 * linear * (quadratic + ae) + (quadratic + ae) * (quadratic + ae);
    // the slope is off by its own error and by the rounding of the term added to it
    const slopeError = phi.slopeError + 8 * U * (Math.abs(phi.slope) + (Math.abs(phi.third) * S * S) / 8);
    const error =
      size * ae +
      Math.abs(half) * dropped +
      (Math.abs(phi.third) / 24 + phi.thirdError / 6) * S * S * S +
      phi.valueError +
      slopeError * S +
      phi.halfError * S * S +
      12 * U * (size * (linear + quadratic) + Math.abs(half) * linear * linear);
    M[out + rest] = error * GROW + TINY;
  };

  /** sign = 1: upper bound of the model; -1: of its negative. */
  const extent = (M: Float64Array, a: number, sign: number): number => {
    let total = sign * M[a]!;
    let absolute = Math.abs(total);
    let k = second;
    for (let i = 0; i < d; i++) {
      const g = Math.abs(M[a + first + i]!);
      const q = sign * M[a + k]!;
      // max of g t + q t^2 over [-1, 1]
      total += q < 0 && g < -2 * q ? (g * g) / (-4 * q) : g + q;
      absolute += g + Math.abs(q);
      k++;
      for (let j = i + 1; j < d; j++, k++) {
        total += Math.abs(M[a + k]!);
        absolute += Math.abs(M[a + k]!);
      }
    }
    const error = M[a + rest]!;
    return total + ((error + 2 ** -46 * (absolute + error)) * GROW + TINY);
  };

  return {
    d,
    size,
    quadratic: (i, j) => second + i * d - (i * (i - 1)) / 2 + (j - i),
    sum,
    product,
    spread,
    compose,
    upper: (M, a) => extent(M, a, 1),
    lower: (M, a) => -extent(M, a, -1),
  };
}
