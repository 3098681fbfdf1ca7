/**
 * Small dense float64 matrices, row-major in a Float64Array; the caller owns all arrays. Methods: Golub and Van Loan,
 * "Matrix Computations", 4th ed., 2013: Cholesky (4.2.1), Householder QR (5.2.1), cyclic Jacobi (8.5.2).
 */

/** out (r x c) = a (r x k) b (k x c). */
export function multiply(a: Float64Array, b: Float64Array, out: Float64Array, r: number, k: number, c: number): void {
  for (let i = 0; i < r; i++) {
    for (let j = 0; j < c; j++) {
      let sum = 0;
      for (let l = 0; l < k; l++) sum += a[i * k + l]! * b[l * c + j]!;
      out[i * c + j] = sum;
    }
  }
}

/** out (c x c) = p^T s p for p (n x c) and symmetric s (n x n); work holds n * c. */
export function congruence(
  s: Float64Array,
  p: Float64Array,
  out: Float64Array,
  n: number,
  c: number,
  work: Float64Array,
): void {
  multiply(s, p, work, n, n, c);
  for (let i = 0; i < c; i++) {
    for (let j = 0; j <= i; j++) {
      let sum = 0;
      for (let l = 0; l < n; l++) sum += p[l * c + i]! * work[l * c + j]!;
      out[i * c + j] = out[j * c + i] = sum;
    }
  }
}

/** x^T s y for s (n x n). */
export function bilinear(s: Float64Array, x: Float64Array, y: Float64Array, n: number): number {
  let sum = 0;
  for (let i = 0; i < n; i++) {
    let row = 0;
    for (let j = 0; j < n; j++) row += s[i * n + j]! * y[j]!;
    sum += x[i]! * row;
  }
  return sum;
}

/** Lower Cholesky factor of a (n x n) into l (upper part zero); false when a is not numerically positive definite. */
export function cholesky(a: Float64Array, l: Float64Array, n: number): boolean {
  for (let i = 0; i < n; i++) {
    for (let j = 0; j <= i; j++) {
      let sum = a[i * n + j]!;
      for (let k = 0; k < j; k++) sum -= l[i * n + k]! * l[j * n + k]!;
      if (i === j) {
        if (!(sum > 0)) return false;
        l[i * n + i] = Math.sqrt(sum);
      } else {
        l[i * n + j] = sum / l[j * n + j]!;
        l[j * n + i] = 0;
      }
    }
  }
  return true;
}

/** x with l x = x in place (l lower, n x n). */
export function solveLower(l: Float64Array, x: Float64Array, n: number): void {
  for (let i = 0; i < n; i++) {
    let sum = x[i]!;
    for (let k = 0; k < i; k++) sum -= l[i * n + k]! * x[k]!;
    x[i] = sum / l[i * n + i]!;
  }
}

/** x with l^T x = x in place (l lower, n x n). */
export function solveLowerTransposed(l: Float64Array, x: Float64Array, n: number): void {
  for (let i = n - 1; i >= 0; i--) {
    let sum = x[i]!;
    for (let k = i + 1; k < n; k++) sum -= l[k * n + i]! * x[k]!;
    x[i] = sum / l[i * n + i]!;
  }
}

/** s (n x n symmetric) becomes l^{-1} s l^{-T} in place; row holds n. */
export function whiten(l: Float64Array, s: Float64Array, n: number, row: Float64Array): void {
  for (let pass = 0; pass < 2; pass++) {
    for (let j = 0; j < n; j++) {
      for (let i = 0; i < n; i++) row[i] = s[j * n + i]!;
      solveLower(l, row, n);
      for (let i = 0; i < n; i++) s[j * n + i] = row[i]!;
    }
    transposeInPlace(s, n);
  }
}

function transposeInPlace(s: Float64Array, n: number): void {
  for (let i = 0; i < n; i++) {
    for (let j = 0; j < i; j++) {
      const held = s[i * n + j]!;
      s[i * n + j] = s[j * n + i]!;
      s[j * n + i] = held;
    }
  }
}

/**
 * Orthonormal bases of the range of b (n x m, full column rank) into q (n x m) and of null(b^T) into p (n x (n-m)),
 * by Householder reflections; work holds n * n + n * m.
 */
export function rangeAndNull(
  b: Float64Array,
  q: Float64Array,
  p: Float64Array,
  n: number,
  m: number,
  work: Float64Array,
): void {
  const r = work.subarray(0, n * m);
  const full = work.subarray(n * m, n * m + n * n);
  r.set(b.subarray(0, n * m));
  full.fill(0);
  for (let i = 0; i < n; i++) full[i * n + i] = 1;
  for (let k = 0; k < m; k++) {
    let norm = 0;
    for (let i = k; i < n; i++) norm += r[i * m + k]! ** 2;
    norm = Math.sqrt(norm);
    if (norm === 0) continue;
    const alpha = r[k * m + k]! > 0 ? -norm : norm;
    const head = r[k * m + k]! - alpha;
    // v = (head, r_{k+1..n, k}); |v|^2 = 2 norm (norm + |r_kk|)
    const beta = 2 / (head * head + norm * norm - r[k * m + k]! ** 2);
    const v = (i: number): number => (i === k ? head : r[i * m + k]!);
    for (let j = k + 1; j < m; j++) {
      let dot = 0;
      for (let i = k; i < n; i++) dot += v(i) * r[i * m + j]!;
      for (let i = k; i < n; i++) r[i * m + j]! -= beta * dot * v(i);
    }
    for (let row = 0; row < n; row++) {
      let dot = 0;
      for (let i = k; i < n; i++) dot += full[row * n + i]! * v(i);
      for (let i = k; i < n; i++) full[row * n + i]! -= beta * dot * v(i);
    }
    r[k * m + k] = alpha;
    // the entries below stay as v's tail; no later step reads them as part of R
  }
  const c = n - m;
  for (let i = 0; i < n; i++) {
    for (let j = 0; j < m; j++) q[i * m + j] = full[i * n + j]!;
    for (let j = 0; j < c; j++) p[i * c + j] = full[i * n + m + j]!;
  }
}

/**
 * Eigenvalues (values, unsorted) and, unless null, orthonormal eigenvectors (columns of vectors) of symmetric a
 * (n x n), which is overwritten. Cyclic Jacobi until the off-diagonal is below 1e-15 of the norm; at most 60 sweeps,
 * far more than the quadratic convergence needs; returns the number of sweeps used.
 */
export function symmetricEigen(a: Float64Array, n: number, values: Float64Array, vectors: Float64Array | null): number {
  if (vectors !== null) {
    vectors.fill(0, 0, n * n);
    for (let i = 0; i < n; i++) vectors[i * n + i] = 1;
  }
  let sweep = 0;
  for (; sweep < 60; sweep++) {
    let off = 0;
    let total = 0;
    for (let i = 0; i < n; i++) {
      total += a[i * n + i]! ** 2;
      for (let j = 0; j < i; j++) off += 2 * a[i * n + j]! ** 2;
    }
    if (off <= 1e-30 * (total + off)) break;
    for (let p = 0; p < n - 1; p++) for (let q = p + 1; q < n; q++) rotate(a, n, p, q, vectors);
  }
  for (let i = 0; i < n; i++) values[i] = a[i * n + i]!;
  return sweep;
}

function rotate(a: Float64Array, n: number, p: number, q: number, vectors: Float64Array | null): void {
  const apq = a[p * n + q]!;
  if (apq === 0) return;
  const theta = (a[q * n + q]! - a[p * n + p]!) / (2 * apq);
  const t = (theta >= 0 ? 1 : -1) / (Math.abs(theta) + Math.sqrt(theta * theta + 1));
  const c = 1 / Math.sqrt(t * t + 1);
  const s = t * c;
  a[p * n + p]! -= t * apq;
  a[q * n + q]! += t * apq;
  a[p * n + q] = a[q * n + p] = 0;
  for (let k = 0; k < n; k++) {
    if (k === p || k === q) continue;
    const akp = a[k * n + p]!;
    const akq = a[k * n + q]!;
    a[k * n + p] = a[p * n + k] = c * akp - s * akq;
    a[k * n + q] = a[q * n + k] = s * akp + c * akq;
  }
  if (vectors === null) return;
  for (let k = 0; k < n; k++) {
    const vkp = vectors[k * n + p]!;
    const vkq = vectors[k * n + q]!;
    vectors[k * n + p] = c * vkp - s * vkq;
    vectors[k * n + q] = s * vkp + c * vkq;
  }
}

/** Index of the largest of the first n values. */
export function argMax(values: Float64Array, n: number): number {
  let best = 0;
  for (let i = 1; i < n; i++) if (values[i]! > values[best]!) best = i;
  return best;
}
