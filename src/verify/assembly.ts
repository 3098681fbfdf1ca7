/** The two symmetric terms of F: A W + W A^T, and the spin of the body frame S W + W S^T. n x n, row-major. */
import type { BodyFrame } from "../model/controlAffine.js";

export function addProductSymmetric(A: Float64Array, W: Float64Array, out: Float64Array, n: number): void {
  for (let i = 0; i < n; i++) {
    for (let j = 0; j < n; j++) {
      let sum = 0;
      for (let l = 0; l < n; l++) sum += A[i * n + l]! * W[l * n + j]!;
      out[i * n + j]! += sum;
      out[j * n + i]! += sum;
    }
  }
}

/** out += scale (S W + W S^T), S = e_b e_a^T - e_a e_b^T on the position pair (a, b). */
export function addSpin(frame: BodyFrame, scale: number, W: Float64Array, out: Float64Array, n: number): void {
  const [a, b] = frame.position;
  for (let j = 0; j < n; j++) {
    const rowA = -scale * W[b * n + j]!;
    const rowB = scale * W[a * n + j]!;
    out[a * n + j]! += rowA;
    out[j * n + a]! += rowA;
    out[b * n + j]! += rowB;
    out[j * n + b]! += rowB;
  }
}
