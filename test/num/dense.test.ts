import { EigenvalueDecomposition, Matrix, QrDecomposition } from "ml-matrix";
import { describe, expect, it } from "vitest";
import { cholesky, rangeAndNull, symmetricEigen, whiten } from "../../src/num/dense.js";
import { seededRandom } from "../../src/num/random.js";

const random = seededRandom(11);
const randomSymmetric = (n: number): Float64Array => {
  const a = new Float64Array(n * n);
  for (let i = 0; i < n; i++) for (let j = 0; j <= i; j++) a[i * n + j] = a[j * n + i] = random.normal();
  return a;
};
const toMatrix = (a: Float64Array, n: number, m = n): Matrix => Matrix.from1DArray(n, m, Array.from(a));

describe("small dense kernels against ml-matrix", () => {
  it("symmetricEigen: values and vectors", () => {
    for (let n = 1; n <= 8; n++) {
      const a = randomSymmetric(n);
      const reference = new EigenvalueDecomposition(toMatrix(a, n), { assumeSymmetric: true }).realEigenvalues.sort(
        (x, y) => x - y,
      );
      const values = new Float64Array(n);
      const vectors = new Float64Array(n * n);
      symmetricEigen(a.slice(), n, values, vectors);
      const V = toMatrix(vectors, n);
      const residual = Matrix.sub(toMatrix(a, n).mmul(V), V.mmul(Matrix.diag(Array.from(values)))).norm();
      expect(residual).toBeLessThan(1e-13);
      expect(Matrix.sub(V.transpose().mmul(V), Matrix.eye(n)).norm()).toBeLessThan(1e-13);
      const sorted = Array.from(values).sort((x, y) => x - y);
      for (const [i, value] of sorted.entries()) expect(value).toBeCloseTo(reference[i]!, 12);
    }
  });
  it("rangeAndNull: orthonormal, spanning, orthogonal to B", () => {
    for (const [n, m] of [
      [3, 1],
      [4, 2],
      [6, 2],
      [5, 4],
    ] as const) {
      const b = Float64Array.from({ length: n * m }, () => random.normal());
      const q = new Float64Array(n * m);
      const p = new Float64Array(n * (n - m));
      rangeAndNull(b, q, p, n, m, new Float64Array(n * n + n * m));
      const [B, Q, P] = [toMatrix(b, n, m), toMatrix(q, n, m), toMatrix(p, n, n - m)];
      expect(B.transpose().mmul(P).norm()).toBeLessThan(1e-13);
      expect(Matrix.sub(P.transpose().mmul(P), Matrix.eye(n - m)).norm()).toBeLessThan(1e-13);
      const reference = new QrDecomposition(B).orthogonalMatrix;
      const projector = (U: Matrix): Matrix => U.mmul(U.transpose());
      expect(Matrix.sub(projector(Q), projector(reference.subMatrix(0, n - 1, 0, m - 1))).norm()).toBeLessThan(1e-12);
    }
  });
  it("whiten: eigenvalues of a pencil", () => {
    const n = 4;
    const s = randomSymmetric(n);
    const root = toMatrix(
      Float64Array.from({ length: n * n }, () => random.normal()),
      n,
    );
    const spd = root.mmul(root.transpose()).add(Matrix.eye(n));
    const l = new Float64Array(n * n);
    expect(cholesky(Float64Array.from(spd.to1DArray()), l, n)).toBe(true);
    const white = s.slice();
    whiten(l, white, n, new Float64Array(n));
    const L = toMatrix(l, n);
    expect(Matrix.sub(L.mmul(toMatrix(white, n)).mmul(L.transpose()), toMatrix(s, n)).norm()).toBeLessThan(1e-12);
  });
  it("cholesky refuses an indefinite matrix", () => {
    expect(cholesky(Float64Array.of(1, 2, 2, 1), new Float64Array(4), 2)).toBe(false);
  });
});
