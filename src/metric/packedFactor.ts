/**
 * W = w0 I + L L^T and its derivative along a direction, from the packed rows of L and dL, and the adjoint back to
 * them. For a scalar s with dS = sum_ij GW_ij dW_ij (GW symmetric): ds/dL = 2 GW L; for the derivative
 * D = dL L^T + L dL^T with symmetric adjoint GD: ds/d(dL) = 2 GD L and ds/dL gains 2 GD dL. Lower entries only.
 */
export function packedSize(n: number): number {
  return (n * (n + 1)) / 2;
}

/** Rows of a packed lower triangle into a full n x n matrix. */
export function unpack(packed: ArrayLike<number>, offset: number, out: Float64Array, n: number): void {
  out.fill(0);
  let at = offset;
  for (let i = 0; i < n; i++) for (let j = 0; j <= i; j++) out[i * n + j] = packed[at++]!;
}

/** W = w0 I + L L^T. */
export function fromFactor(L: Float64Array, w0: number, W: Float64Array, n: number): void {
  for (let i = 0; i < n; i++) {
    for (let j = 0; j <= i; j++) {
      let sum = i === j ? w0 : 0;
      for (let k = 0; k <= j; k++) sum += L[i * n + k]! * L[j * n + k]!;
      W[i * n + j] = W[j * n + i] = sum;
    }
  }
}

/** D = dL L^T + L dL^T. */
export function factorTangent(L: Float64Array, dL: Float64Array, D: Float64Array, n: number): void {
  for (let i = 0; i < n; i++) {
    for (let j = 0; j <= i; j++) {
      let sum = 0;
      for (let k = 0; k <= j; k++) sum += dL[i * n + k]! * L[j * n + k]! + L[i * n + k]! * dL[j * n + k]!;
      D[i * n + j] = D[j * n + i] = sum;
    }
  }
}

/** out (packed, from offset) += 2 G L, lower entries, for symmetric G. */
export function addFactorAdjoint(G: Float64Array, L: Float64Array, out: Float32Array, offset: number, n: number): void {
  let at = offset;
  for (let i = 0; i < n; i++) {
    for (let j = 0; j <= i; j++) {
      let sum = 0;
      for (let k = j; k < n; k++) sum += G[i * n + k]! * L[k * n + j]!;
      out[at++]! += 2 * sum;
    }
  }
}

/**
 * The matrix of Y -> L0 Y on packed lower triangles, packed x packed row-major, for row vectors y: packed(L0 Y) = y T.
 */
export function leftProduct(L0: Float64Array, n: number): number[][] {
  const size = packedSize(n);
  const T = Array.from({ length: size }, () => new Array<number>(size).fill(0));
  for (let i = 0; i < n; i++) {
    for (let k = 0; k <= i; k++) {
      for (let j = 0; j <= k; j++) T[packedSize(k) + j]![packedSize(i) + j] = L0[i * n + k]!;
    }
  }
  return T;
}
