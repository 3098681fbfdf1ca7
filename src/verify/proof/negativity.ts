/**
 * Is a symmetric matrix of Taylor models negative definite all over its cell? With M(t) = M_0 + sum t_i D_i +
 * sum t_i t_j Q_ij + E, |E| <= e:
 *
 *  1. Congruence by Y, a float64 inverse Cholesky factor of -M_0. Any non-singular Y keeps the sign, so its own rounding
 *     does not matter; the products' does: gamma_{2k+2} |Y| |M| |Y|^T, together with e.
 *  2. t_i^2 = 1/2 +- 1/2, |t_i t_j| <= 1: the quadratic part becomes a shift of M_0 and a bound of each entry; a symmetric
 *     perturbation bounded entrywise by R is bounded by the diagonal of R's row sums (Gershgorin).
 *  3. What is left is affine in t and its largest eigenvalue convex: the 2^d corners decide. Each corner by Cholesky in
 *     float64: success for K - c I, c above gamma_{k+1} trace, shows that K is positive definite. Source: Rump,
 *     "Verification of positive definiteness", BIT 46, 2006, theorem 2.3.
 */

import { cholesky } from "../../num/dense.js";
import { U } from "../../num/directed.js";
import type { Node, TaylorEvaluator } from "../../num/taylorGraph.js";
import { ZERO } from "../../num/taylorGraph.js";
import { GROW, TINY } from "../../num/taylorModel.js";

export interface NegativityResult {
  readonly holds: boolean;
  /** How much of the margin at the centre the cell's variation uses up; 1 or more where it may fail; Infinity where the centre fails. */
  readonly load: number;
  /** A corner of the cell, as -1 and 1, where the affine part alone fails; else null. */
  readonly corner: readonly number[] | null;
}

export interface NegativityTest {
  /** M = sum of weights times matrices; how much each dimension bends M is added to `influence` (d). */
  test(weights: ArrayLike<number>, shift: number, influence: Float64Array | null): NegativityResult;
}

/** matrices: each k x k nodes, symmetric; `shift` of a test is added to the diagonal. */
export function negativityTest(
  evaluator: TaylorEvaluator,
  matrices: readonly (readonly Node[])[],
  k: number,
): NegativityTest {
  const { kernel, M } = evaluator;
  const { d, size } = kernel;
  const count = size - 1;
  const kk = k * k;
  const offsets = matrices.map((nodes) => Int32Array.from(nodes, (node) => (node === ZERO ? -1 : evaluator.at(node))));
  const coefficients = new Float64Array(count * kk);
  const error = new Float64Array(kk);
  const absolute = new Float64Array(kk);
  const factor = new Float64Array(kk);
  const Y = new Float64Array(kk);
  const work = new Float64Array(kk);
  const corner = new Float64Array(kk);
  const shifted = new Float64Array(kk);
  const variation = new Float64Array(k);
  const radius = new Float64Array(k);
  const gatherSlack = (matrices.length + 4) * U;

  const gather = (weights: ArrayLike<number>, shift: number): void => {
    coefficients.fill(0);
    for (let i = 0; i < k; i++) {
      for (let j = 0; j <= i; j++) {
        const ij = i * k + j;
        let sizes = i === j ? Math.abs(shift) : 0;
        let e = 0;
        for (let f = 0; f < offsets.length; f++) {
          const o = offsets[f]![ij]!;
          const w = weights[f]!;
          if (o < 0 || w === 0) continue;
          for (let c = 0; c < count; c++) {
            const value = w * M[o + c]!;
            coefficients[c * kk + ij]! += value;
            sizes += Math.abs(value);
          }
          e += Math.abs(w) * M[o + count]!;
        }
        if (i === j) coefficients[ij]! += shift;
        error[ij] = error[j * k + i] = (e + gatherSlack * sizes) * GROW + TINY;
        absolute[ij] = absolute[j * k + i] = sizes;
        for (let c = 0; c < count; c++) coefficients[c * kk + j * k + i] = coefficients[c * kk + ij]!;
      }
    }
  };

  /** block = Y block Y^T for the lower triangular Y; sizes only with `positive`, when block >= 0. */
  const congruent = (block: Float64Array, at: number, positive: boolean): void => {
    for (let i = 0; i < k; i++) {
      for (let j = 0; j < k; j++) {
        let sum = 0;
        for (let l = 0; l <= i; l++) {
          const y = Y[i * k + l]!;
          sum += (positive ? Math.abs(y) : y) * block[at + l * k + j]!;
        }
        work[i * k + j] = sum;
      }
    }
    for (let i = 0; i < k; i++) {
      for (let j = 0; j <= i; j++) {
        let sum = 0;
        for (let l = 0; l <= j; l++) {
          const y = Y[j * k + l]!;
          sum += (positive ? Math.abs(y) : y) * work[i * k + l]!;
        }
        block[at + i * k + j] = block[at + j * k + i] = sum;
      }
    }
  };

  const invertFactor = (): void => {
    Y.fill(0);
    for (let j = 0; j < k; j++) {
      Y[j * k + j] = 1 / factor[j * k + j]!;
      for (let i = j + 1; i < k; i++) {
        let sum = 0;
        for (let l = j; l < i; l++) sum -= factor[i * k + l]! * Y[l * k + j]!;
        Y[i * k + j] = sum / factor[i * k + i]!;
      }
    }
  };

  const test = (weights: ArrayLike<number>, shift: number, influence: Float64Array | null): NegativityResult => {
    gather(weights, shift);
    for (let i = 0; i < kk; i++) shifted[i] = -coefficients[i]!;
    if (!cholesky(shifted, factor, k)) return { holds: false, load: Number.POSITIVE_INFINITY, corner: null };
    invertFactor();
    for (let c = 0; c < count; c++) congruent(coefficients, c * kk, false);
    for (let i = 0; i < kk; i++) error[i] = (error[i]! + (2 * k + 12) * U * absolute[i]!) * GROW;
    congruent(error, 0, true);

    // base = -(M_0 + 1/2 sum Q_ii), kept in the first block; variation: row sums of the affine part
    let trace = 0;
    for (let a = 0; a < k; a++) {
      let spread = 0;
      let off = 0;
      let rest = 0;
      let sizes = 1;
      for (let b = 0; b < k; b++) {
        const ab = a * k + b;
        let base = -coefficients[ab]!;
        for (let i = 0; i < d; i++) {
          spread += Math.abs(coefficients[(1 + i) * kk + ab]!);
          for (let j = i; j < d; j++) {
            const q = coefficients[kernel.quadratic(i, j) * kk + ab]!;
            if (j === i) base -= q / 2;
            rest += j === i ? Math.abs(q) / 2 : Math.abs(q);
          }
        }
        coefficients[ab] = base;
        sizes += Math.abs(base);
        if (a !== b) off += Math.abs(base);
        rest += error[ab]!;
      }
      trace += Math.abs(coefficients[a * k + a]!);
      variation[a] = spread + off;
      // 2^-44 of all sizes covers the rounding of base and of the corner matrices (fewer than 100 terms each)
      radius[a] = rest * GROW + 2 ** -44 * (sizes + spread + rest);
    }
    if (influence !== null) addInfluence(influence);
    const slack = 2 ** -44 * (1 + trace + sumOf(variation));
    let load = 0;
    for (let a = 0; a < k; a++) {
      const room = coefficients[a * k + a]!;
      const used = (variation[a]! + radius[a]! + slack) * (1 + 2 ** -44);
      load = Math.max(load, room > 0 ? used / room : Number.POSITIVE_INFINITY);
      if (Number.isNaN(used)) load = Number.POSITIVE_INFINITY;
    }
    if (load < 1) return { holds: true, load, corner: null };
    if (load === Number.POSITIVE_INFINITY) return { holds: false, load, corner: null };
    for (let s = 0; s < 2 ** d; s++) {
      for (let i = 0; i < kk; i++) corner[i] = coefficients[i]!;
      for (let i = 0; i < d; i++) {
        const sign = (s >> i) & 1 ? -1 : 1;
        const block = (1 + i) * kk;
        for (let e = 0; e < kk; e++) corner[e]! += sign * coefficients[block + e]!;
      }
      shifted.set(corner);
      for (let a = 0; a < k; a++) shifted[a * k + a]! -= radius[a]! + slack;
      if (cholesky(shifted, factor, k)) continue;
      const fails = !cholesky(corner, factor, k);
      const at = fails ? Array.from({ length: d }, (_, i) => ((s >> i) & 1 ? 1 : -1)) : null;
      return { holds: false, load, corner: at };
    }
    return { holds: true, load, corner: null };
  };

  const addInfluence = (influence: Float64Array): void => {
    for (let i = 0; i < d; i++) {
      let total = 0;
      for (let j = 0; j < d; j++) {
        const block = kernel.quadratic(Math.min(i, j), Math.max(i, j)) * kk;
        for (let e = 0; e < kk; e++) total += Math.abs(coefficients[block + e]!);
      }
      influence[i]! += total;
    }
  };

  return { test };
}

function sumOf(values: Float64Array): number {
  let total = 0;
  for (const value of values) total += value;
  return total;
}
