/**
 * Chebyshev-Gauss-Lobatto points on [0, 1], Clenshaw-Curtis weights and the differentiation matrix. Source: Trefethen,
 * "Spectral Methods in MATLAB", SIAM 2000, chapter 6 (matrix, with the diagonal from the row sums) and chapter 12
 * (weights), moved from [-1, 1] to [0, 1] in ascending order: s_k = (1 - cos(k pi / N)) / 2. The weights are exact for
 * polynomials of degree N (N + 1 when N is even), the matrix for degree N.
 */
export interface Chebyshev {
  /** N. */
  readonly degree: number;
  /** N + 1, from 0 to 1. */
  readonly points: Float64Array;
  /** N + 1, summing to 1. */
  readonly weights: Float64Array;
  /** (N + 1) x (N + 1): row k gives the derivative at point k from the values at all points. */
  readonly derivative: Float64Array;
}

/** Throws unless degree is a whole number >= 2. */
export function chebyshev(degree: number): Chebyshev {
  if (!Number.isInteger(degree) || degree < 2) {
    throw new Error(`degree of a path is ${degree}; give a whole number of at least 2`);
  }
  const size = degree + 1;
  const points = Float64Array.from({ length: size }, (_, k) => Math.sin((k * Math.PI) / (2 * degree)) ** 2);
  return { degree, points, weights: clenshawCurtis(degree), derivative: differentiation(points) };
}

/** w_k = (c_k / 2N) (1 - sum_j b_j / (4 j^2 - 1) cos(2 j k pi / N)), c = 1 at the ends and 2 inside, b = 2 but for 2j = N: 1. */
function clenshawCurtis(degree: number): Float64Array {
  return Float64Array.from({ length: degree + 1 }, (_, k) => {
    let sum = 1;
    for (let j = 1; 2 * j <= degree; j++) {
      const share = 2 * j === degree ? 1 : 2;
      sum -= (share * Math.cos((2 * j * k * Math.PI) / degree)) / (4 * j * j - 1);
    }
    return (k === 0 || k === degree ? 0.5 : 1) * (sum / degree);
  });
}

function differentiation(points: Float64Array): Float64Array {
  const size = points.length;
  const D = new Float64Array(size * size);
  const scale = (k: number): number => (k === 0 || k === size - 1 ? 2 : 1) * (k % 2 === 0 ? 1 : -1);
  for (let k = 0; k < size; k++) {
    let row = 0;
    for (let j = 0; j < size; j++) {
      if (j === k) continue;
      const entry = scale(k) / scale(j) / (points[k]! - points[j]!);
      D[k * size + j] = entry;
      row += entry;
    }
    D[k * size + k] = -row;
  }
  return D;
}
