/** The 2^m corners of [-1, 1]^m, in binary order: bit j of the index set means +1 for input j. */
export function inputCorners(m: number): Float64Array[] {
  return Array.from({ length: 2 ** m }, (_, c) => Float64Array.from({ length: m }, (_, j) => ((c >> j) & 1 ? 1 : -1)));
}
