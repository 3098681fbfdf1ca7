/**
 * Sobol low-discrepancy points. Source: Joe and Kuo, "Constructing Sobol sequences with better two-dimensional
 * projections", SIAM J. Sci. Comput. 30(5), 2008, direction numbers of the set D6; Gray-code order (Antonov and Saleev,
 * 1979). 32-bit; dimensions 1 to 16.
 */

/** [degree s, polynomial a, initial m_1..m_s] for dimensions 2 to 16. */
const D6: readonly (readonly [number, number, readonly number[]])[] = [
  [1, 0, [1]],
  [2, 1, [1, 3]],
  [3, 1, [1, 3, 1]],
  [3, 2, [1, 1, 1]],
  [4, 1, [1, 1, 3, 3]],
  [4, 4, [1, 3, 5, 13]],
  [5, 2, [1, 1, 5, 5, 17]],
  [5, 4, [1, 1, 5, 5, 5]],
  [5, 7, [1, 1, 7, 11, 19]],
  [5, 11, [1, 1, 5, 1, 1]],
  [5, 13, [1, 1, 1, 3, 11]],
  [5, 14, [1, 3, 5, 5, 31]],
  [6, 1, [1, 3, 3, 9, 7, 49]],
  [6, 13, [1, 1, 1, 15, 21, 21]],
  [6, 16, [1, 3, 1, 13, 27, 49]],
];
const BITS = 32;

/** count points after the first `skip`, flat row-major count x dimension, in [0, 1). */
export function sobolPoints(dimension: number, count: number, skip = 0): Float64Array {
  if (!Number.isInteger(dimension) || dimension < 1 || dimension > D6.length + 1) {
    throw new Error(`Sobol points: given dimension ${dimension}; allowed are whole numbers from 1 to ${D6.length + 1}`);
  }
  const directions = Array.from({ length: dimension }, (_, d) => directionNumbers(d));
  const state = new Uint32Array(dimension);
  const out = new Float64Array(count * dimension);
  for (let i = 0; i < skip + count; i++) {
    if (i >= skip) for (let d = 0; d < dimension; d++) out[(i - skip) * dimension + d] = state[d]! / 2 ** BITS;
    const bit = trailingOnes(i);
    for (let d = 0; d < dimension; d++) state[d]! ^= directions[d]![bit]!;
  }
  return out;
}

function trailingOnes(i: number): number {
  let count = 0;
  for (let rest = i; rest & 1; rest >>>= 1) count++;
  return count;
}

function directionNumbers(d: number): Uint32Array {
  const v = new Uint32Array(BITS);
  if (d === 0) {
    for (let k = 0; k < BITS; k++) v[k] = 2 ** (BITS - 1 - k);
    return v;
  }
  const [s, a, m] = D6[d - 1]!;
  for (let k = 0; k < s; k++) v[k] = m[k]! * 2 ** (BITS - 1 - k);
  for (let k = s; k < BITS; k++) {
    let next = v[k - s]! ^ (v[k - s]! >>> s);
    for (let j = 1; j < s; j++) if ((a >>> (s - 1 - j)) & 1) next ^= v[k - j]!;
    v[k] = next;
  }
  return v;
}
