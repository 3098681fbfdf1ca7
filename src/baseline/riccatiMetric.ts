/**
 * A constant dual metric from one linear plant: with X the stabilising solution of the Riccati equation for A + shift I,
 * W = X^-1 obeys A W + W A^T + 2 shift W - B R^-1 B^T = -W Q W < 0, so it contracts at that plant faster than `shift`.
 * Source: Anderson and Moore, "Optimal Control: Linear Quadratic Methods", 1990, section 3.5 (prescribed stability).
 */
import { inverse, Matrix } from "ml-matrix";
import { riccati } from "./riccati.js";

export type RiccatiMetricResult =
  | {
      readonly status: "solved";
      /** n x n, symmetric positive definite. */
      readonly W: Float64Array;
      /** Residual of the Riccati equation over its largest term. */
      readonly relativeResidual: number;
    }
  | { readonly status: "noStabilisingSolution"; readonly reason: string };

/** A, Q: n x n; B: n x m; R: m x m, positive definite; shift in 1/s. */
export function riccatiMetric(
  A: Float64Array,
  B: Float64Array,
  shift: number,
  Q: Float64Array,
  R: Float64Array,
): RiccatiMetricResult {
  const n = Math.sqrt(A.length);
  const m = Math.sqrt(R.length);
  if (!Number.isInteger(n) || !Number.isInteger(m) || B.length !== n * m || Q.length !== n * n) {
    throw new Error(
      `Riccati metric: given A, B, Q, R of ${A.length}, ${B.length}, ${Q.length}, ${R.length} entries; they must be n x n, n x m, n x n and m x m`,
    );
  }
  const matrix = (rows: number, columns: number, values: Float64Array): Matrix =>
    Matrix.from1DArray(rows, columns, Array.from(values));
  const input = matrix(n, m, B);
  const G = input.mmul(inverse(matrix(m, m, R))).mmul(input.transpose());
  const result = riccati(matrix(n, n, A).add(Matrix.eye(n).mul(shift)), G, matrix(n, n, Q));
  if (result.status !== "solved") return result;
  const W = inverse(result.X);
  const symmetric = Matrix.add(W, W.transpose()).div(2);
  return {
    status: "solved",
    W: Float64Array.from(symmetric.to1DArray()),
    relativeResidual: result.relativeResidual,
  };
}
