/**
 * The stabilising solution X of the continuous algebraic Riccati equation
 *   0 = Q + A^T X + X A - X G X,      G = B R^{-1} B^T,   closed loop A - G X stable,
 * by the matrix sign function of the Hamiltonian (Roberts, Int. J. Control 32(4), 1980; determinant scaling: Byers,
 * Linear Algebra Appl. 85, 1987), then Newton-Kleinman steps (Kleinman, IEEE TAC 13(1), 1968) to full accuracy.
 * All matrices n x n of ml-matrix.
 */
import { inverse, LuDecomposition, Matrix, QrDecomposition } from "ml-matrix";

export type RiccatiResult =
  | {
      readonly status: "solved";
      readonly X: Matrix /** Residual norm over the norm of its largest term. */;
      readonly relativeResidual: number;
    }
  | { readonly status: "noStabilisingSolution"; readonly reason: string };

const MOST_STEPS = 100;
const KLEINMAN_STEPS = 8;

export function riccati(A: Matrix, G: Matrix, Q: Matrix): RiccatiResult {
  const n = A.rows;
  const H = Matrix.zeros(2 * n, 2 * n);
  H.setSubMatrix(A, 0, 0);
  H.setSubMatrix(Matrix.mul(G, -1), 0, n);
  H.setSubMatrix(Matrix.mul(Q, -1), n, 0);
  H.setSubMatrix(Matrix.mul(A.transpose(), -1), n, n);
  const sign = matrixSign(H);
  if (sign === null) return failed("the Hamiltonian has eigenvalues on the imaginary axis");
  // (sign + I) [I; X] = 0
  const left = Matrix.zeros(2 * n, n);
  left.setSubMatrix(sign.subMatrix(0, n - 1, n, 2 * n - 1), 0, 0);
  left.setSubMatrix(sign.subMatrix(n, 2 * n - 1, n, 2 * n - 1).add(Matrix.eye(n)), n, 0);
  const right = Matrix.zeros(2 * n, n);
  right.setSubMatrix(
    sign
      .subMatrix(0, n - 1, 0, n - 1)
      .add(Matrix.eye(n))
      .mul(-1),
    0,
    0,
  );
  right.setSubMatrix(sign.subMatrix(n, 2 * n - 1, 0, n - 1).mul(-1), n, 0);
  const orthogonal = new QrDecomposition(left);
  if (!orthogonal.isFullRank()) return failed("an unstable mode is reached by no input");
  let best = symmetric(orthogonal.solve(right));
  let bestResidual = relativeResidual(A, G, Q, best);
  for (let step = 0; step < KLEINMAN_STEPS; step++) {
    const closed = Matrix.sub(A, G.mmul(best));
    const next = lyapunov(closed, Matrix.add(Q, best.mmul(G).mmul(best)));
    if (next === null) break;
    const residual = relativeResidual(A, G, Q, next);
    if (!(residual < bestResidual)) break;
    best = next;
    bestResidual = residual;
  }
  if (!(bestResidual < 1e-6)) return failed(`the residual stays at ${bestResidual.toExponential(1)} of its terms`);
  return { status: "solved", X: best, relativeResidual: bestResidual };
}

/** X with A^T X + X A + Q = 0 for stable A; null when A is not stable. */
export function lyapunov(A: Matrix, Q: Matrix): Matrix | null {
  let Z = A.clone();
  let P = Q.clone();
  for (let step = 0; step < MOST_STEPS; step++) {
    const Zi = inverseOrNull(Z);
    if (Zi === null) return null;
    const c = Math.sqrt(Zi.norm() / Z.norm());
    P = Matrix.add(Matrix.mul(P, c), Zi.transpose().mmul(P).mmul(Zi).div(c)).div(2);
    const next = Matrix.add(Matrix.mul(Z, c), Matrix.div(Zi, c)).div(2);
    const moved = Matrix.sub(next, Z).norm() / next.norm();
    Z = next;
    if (moved < 1e-14) break;
  }
  const isStable = Matrix.add(Z, Matrix.eye(A.rows)).norm() < 1e-6 * A.rows;
  return isStable ? symmetric(P.div(2)) : null;
}

function matrixSign(H: Matrix): Matrix | null {
  let Z = H;
  for (let step = 0; step < MOST_STEPS; step++) {
    const lu = new LuDecomposition(Z);
    const Zi = inverseOrNull(Z);
    if (Zi === null) return null;
    const logDet = lu.upperTriangularMatrix.diagonal().reduce((sum, value) => sum + Math.log(Math.abs(value)), 0);
    const moved0 = step < 20 ? Math.exp(-logDet / Z.rows) : 1;
    const next = Matrix.add(Matrix.mul(Z, moved0), Matrix.div(Zi, moved0)).div(2);
    const moved = Matrix.sub(next, Z).norm() / next.norm();
    Z = next;
    if (moved < 1e-13) return Z;
  }
  // stagnation near rounding is a sign still when its square is the identity
  return Matrix.sub(Z.mmul(Z), Matrix.eye(Z.rows)).norm() < 1e-4 * Z.rows ? Z : null;
}

function inverseOrNull(Z: Matrix): Matrix | null {
  try {
    const Zi = inverse(Z);
    return Number.isFinite(Zi.norm()) ? Zi : null;
  } catch {
    return null;
  }
}

function relativeResidual(A: Matrix, G: Matrix, Q: Matrix, X: Matrix): number {
  const XA = X.mmul(A);
  const XGX = X.mmul(G).mmul(X);
  const residual = Matrix.add(Q, XA).add(XA.transpose()).sub(XGX).norm();
  return residual / Math.max(Q.norm(), XA.norm(), XGX.norm());
}

function symmetric(X: Matrix): Matrix {
  return Matrix.add(X, X.transpose()).div(2);
}

function failed(reason: string): RiccatiResult {
  return { status: "noStabilisingSolution", reason };
}
