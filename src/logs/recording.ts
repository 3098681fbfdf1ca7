/**
 * Recorded runs after reading and cutting. SI and radians; headings unwrapped within a piece. Pieces of one recording
 * are one run: runs are what is exchangeable.
 */
export interface Piece {
  /** s, strictly increasing, length N. */
  readonly time: Float64Array;
  /** N x n, row-major. */
  readonly states: Float64Array;
  /** N x m, row-major; row k is held from time k to time k+1. */
  readonly inputs: Float64Array;
}

export interface Run {
  readonly id: string;
  readonly file: string;
  readonly pieces: readonly Piece[];
}
