/**
 * One block of a semidefinite program: S = F_0 + sum_i x_i F_i > 0 with its multiplier Z > 0, in the scaling of Nesterov
 * and Todd ("Primal-dual interior-point methods for self-scaled cones", SIAM J. Optim. 8(2), 1998; the form here: Todd,
 * Toh and Tutuncu, SIAM J. Optim. 8(3), 1998): S = L L^T, Z = N N^T, L^T N = U D V^T (one-sided Jacobi, Golub and Van
 * Loan, 4th ed., 2013, section 8.6.3), R = N V D^{-1/2}. Then R^T S R = R^-1 Z R^-T = D, and the terms R^T F_i R make
 * Newton's matrix. They are kept packed (lower rows, off-diagonal entries times sqrt 2): a trace of a product is a dot.
 */
import { cholesky } from "../num/dense.js";
import { smallestEigenvalue } from "./smallestEigenvalue.js";

export interface Block {
  readonly size: number;
  /** size x size, row-major, symmetric. */
  readonly constant: Float64Array;
  /** One symmetric matrix a variable that enters the block. */
  readonly terms: readonly { readonly variable: number; readonly matrix: Float64Array }[];
}

export interface SemidefiniteBlock {
  /** S at x, and Z = mu S^-1; false when S is not positive definite. */
  start(x: Float64Array, mu: number): boolean;
  /** Scaling at the present S and Z; false when one of them is not positive definite to rounding. */
  scale(): boolean;
  /** tr S Z at the last scaling. */
  product(): number;
  /** Adds the lower triangle of Newton's matrix (n x n). */
  addNewtonMatrix(matrix: Float64Array, n: number): void;
  /**
   * Sets C of dS + dZ = C (scaled) that leads to S Z = target I, with the second-order term of the last direction when
   * `corrected`, and adds tr(F_i (Z + C)) to `out`.
   */
  aim(target: number, corrected: boolean, out: Float64Array): void;
  /** Sets dS and dZ from dx; the longest steps (at most 1) that keep a share of the way to the boundary. */
  direct(dx: Float64Array, share: number): void;
  readonly step: { slack: number; multiplier: number };
  /** tr (S + a dS)(Z + b dZ). */
  productAlong(slack: number, multiplier: number): number;
  /** Moves S to x and Z by its direction; false when S is not positive definite there (Z is then left). */
  moveTo(x: Float64Array, multiplier: number): boolean;
}

export function semidefiniteBlock({ size: k, constant, terms }: Block): SemidefiniteBlock {
  const packed = (k * (k + 1)) / 2;
  const entries = terms.map(({ variable, matrix }) => lowerEntries(variable, matrix, k));
  const S = new Float64Array(k * k);
  const Z = new Float64Array(k * k);
  const L = new Float64Array(k * k);
  const R = new Float64Array(k * k);
  const product = new Float64Array(k * k);
  const D = new Float64Array(k);
  const scaledTerms = new Float64Array(terms.length * packed);
  const dS = new Float64Array(packed);
  const dZ = new Float64Array(packed);
  const C = new Float64Array(packed);
  const full = new Float64Array(k * k);
  const second = new Float64Array(k * k);
  const work = new Float64Array(4 * k);
  const step = { slack: 1, multiplier: 1 };

  const slackAt = (x: Float64Array): boolean => {
    S.set(constant);
    for (const { variable, row, column, value } of entries) {
      const xi = x[variable]!;
      for (let e = 0; e < value.length; e++) S[row[e]! * k + column[e]!]! += xi * value[e]!;
    }
    return cholesky(S, L, k);
  };
  const scaleTerms = (): void => {
    scaledTerms.fill(0);
    for (let a = 0; a < entries.length; a++) {
      const { row, column, value } = entries[a]!;
      for (let e = 0; e < value.length; e++) {
        const i = row[e]! * k;
        const j = column[e]! * k;
        const v = i === j ? value[e]! / 2 : value[e]!;
        let at = a * packed;
        for (let r = 0; r < k; r++) {
          const ri = v * R[i + r]!;
          const rj = v * R[j + r]!;
          for (let c = 0; c <= r; c++) scaledTerms[at++]! += ri * R[j + c]! + rj * R[i + c]!;
        }
      }
      let at = a * packed;
      for (let r = 0; r < k; r++) {
        for (let c = 0; c < r; c++) scaledTerms[at++]! *= Math.SQRT2;
        at++;
      }
    }
  };
  /** The longest step to D + s X >= 0 times `share`, at most 1. */
  const longest = (X: Float64Array, share: number): number => {
    let at = 0;
    for (let r = 0; r < k; r++) {
      for (let c = 0; c <= r; c++) {
        const entry = (c === r ? X[at]! : X[at]! * Math.SQRT1_2) / Math.sqrt(D[r]! * D[c]!);
        full[r * k + c] = full[c * k + r] = entry;
        at++;
      }
    }
    const least = smallestEigenvalue(full, k, work);
    return least < 0 ? Math.min(1, -share / least) : 1;
  };

  return {
    start: (x, mu) => {
      if (!slackAt(x)) return false;
      inverseOf(L, Z, k);
      for (let i = 0; i < k * k; i++) Z[i]! *= mu;
      return true;
    },
    scale: () => {
      if (!cholesky(Z, R, k)) return false;
      for (let i = 0; i < k; i++) {
        for (let j = 0; j < k; j++) {
          let sum = 0;
          for (let l = i; l < k; l++) sum += L[l * k + i]! * R[l * k + j]!;
          product[i * k + j] = sum;
        }
      }
      orthogonaliseColumns(product, R, k);
      for (let j = 0; j < k; j++) {
        let sum = 0;
        for (let i = 0; i < k; i++) sum += product[i * k + j]! ** 2;
        D[j] = Math.sqrt(sum);
        if (!(D[j]! > 0)) return false;
        const factor = 1 / Math.sqrt(D[j]!);
        for (let i = 0; i < k; i++) R[i * k + j]! *= factor;
      }
      scaleTerms();
      return true;
    },
    product: () => D.reduce((sum, d) => sum + d * d, 0),
    addNewtonMatrix: (matrix, n) => {
      for (let a = 0; a < entries.length; a++) {
        const va = entries[a]!.variable;
        for (let b = 0; b <= a; b++) {
          const vb = entries[b]!.variable;
          let sum = 0;
          for (let i = a * packed, j = b * packed; i < (a + 1) * packed; i++, j++) {
            sum += scaledTerms[i]! * scaledTerms[j]!;
          }
          matrix[va >= vb ? va * n + vb : vb * n + va]! += sum;
        }
      }
    },
    aim: (target, corrected, out) => {
      if (corrected) symmetricProduct(dS, dZ, second, full, k);
      let at = 0;
      for (let r = 0; r < k; r++) {
        for (let c = 0; c <= r; c++) {
          let side = c === r ? target - D[r]! ** 2 : 0;
          if (corrected) side -= second[r * k + c]!;
          C[at++] = ((2 * side) / (D[r]! + D[c]!)) * (c === r ? 1 : Math.SQRT2);
        }
      }
      for (let a = 0; a < entries.length; a++) {
        let sum = 0;
        for (let i = 0; i < packed; i++) sum += C[i]! * scaledTerms[a * packed + i]!;
        for (let r = 0; r < k; r++) sum += D[r]! * scaledTerms[a * packed + (r * (r + 3)) / 2]!;
        out[entries[a]!.variable]! += sum;
      }
    },
    direct: (dx, share) => {
      dS.fill(0);
      for (let a = 0; a < entries.length; a++) {
        const di = dx[entries[a]!.variable]!;
        for (let i = 0; i < packed; i++) dS[i]! += di * scaledTerms[a * packed + i]!;
      }
      for (let i = 0; i < packed; i++) dZ[i] = C[i]! - dS[i]!;
      step.slack = longest(dS, share);
      step.multiplier = longest(dZ, share);
    },
    step,
    productAlong: (slack, multiplier) => {
      let sum = 0;
      let at = 0;
      for (let r = 0; r < k; r++) {
        for (let c = 0; c <= r; c++, at++) {
          const d = c === r ? D[r]! : 0;
          sum += (d + slack * dS[at]!) * (d + multiplier * dZ[at]!);
        }
      }
      return sum;
    },
    moveTo: (x, multiplier) => {
      if (!slackAt(x)) return false;
      let at = 0;
      for (let r = 0; r < k; r++) {
        for (let c = 0; c <= r; c++, at++) {
          const entry = multiplier * dZ[at]! * (c === r ? 1 : Math.SQRT1_2) + (c === r ? D[r]! : 0);
          full[r * k + c] = full[c * k + r] = entry;
        }
      }
      // Z = R (D + s dZ) R^T
      for (let i = 0; i < k; i++) {
        for (let j = 0; j < k; j++) {
          let sum = 0;
          for (let l = 0; l < k; l++) sum += R[i * k + l]! * full[l * k + j]!;
          second[i * k + j] = sum;
        }
      }
      for (let i = 0; i < k; i++) {
        for (let j = 0; j <= i; j++) {
          let sum = 0;
          for (let l = 0; l < k; l++) sum += second[i * k + l]! * R[j * k + l]!;
          Z[i * k + j] = Z[j * k + i] = sum;
        }
      }
      return true;
    },
  };
}

/** Lower entries (i >= j) of a term that are not zero. */
function lowerEntries(variable: number, matrix: Float64Array, size: number) {
  const at = Array.from({ length: size * size }, (_, e) => e).filter((e) => e % size <= e / size && matrix[e] !== 0);
  return {
    variable,
    row: Int32Array.from(at, (e) => Math.floor(e / size)),
    column: Int32Array.from(at, (e) => e % size),
    value: Float64Array.from(at, (e) => matrix[e]!),
  };
}

/** (L L^T)^-1. */
function inverseOf(L: Float64Array, out: Float64Array, n: number): void {
  const inverse = new Float64Array(n * n);
  for (let j = 0; j < n; j++) {
    inverse[j * n + j] = 1 / L[j * n + j]!;
    for (let i = j + 1; i < n; i++) {
      let sum = 0;
      for (let l = j; l < i; l++) sum -= L[i * n + l]! * inverse[l * n + j]!;
      inverse[i * n + j] = sum / L[i * n + i]!;
    }
  }
  for (let i = 0; i < n; i++) {
    for (let j = 0; j < n; j++) {
      let sum = 0;
      for (let l = Math.max(i, j); l < n; l++) sum += inverse[l * n + i]! * inverse[l * n + j]!;
      out[i * n + j] = sum;
    }
  }
}

/** Rotates pairs of columns of a, and of b alike, until those of a are orthogonal. */
function orthogonaliseColumns(a: Float64Array, b: Float64Array, n: number): void {
  for (let sweep = 0; sweep < 40; sweep++) {
    let most = 0;
    for (let p = 0; p < n - 1; p++) {
      for (let q = p + 1; q < n; q++) {
        let [app, aqq, apq] = [0, 0, 0];
        for (let i = 0; i < n; i++) {
          const x = a[i * n + p]!;
          const y = a[i * n + q]!;
          app += x * x;
          aqq += y * y;
          apq += x * y;
        }
        const cosine = Math.abs(apq) / Math.sqrt(app * aqq);
        if (!(cosine > 1e-15)) continue;
        most = Math.max(most, cosine);
        const theta = (aqq - app) / (2 * apq);
        const t = (theta >= 0 ? 1 : -1) / (Math.abs(theta) + Math.sqrt(theta * theta + 1));
        const c = 1 / Math.sqrt(t * t + 1);
        const s = t * c;
        for (const m of [a, b]) {
          for (let i = 0; i < n; i++) {
            const x = m[i * n + p]!;
            const y = m[i * n + q]!;
            m[i * n + p] = c * x - s * y;
            m[i * n + q] = s * x + c * y;
          }
        }
      }
    }
    // the next sweep squares what is left
    if (most < 1e-8) return;
  }
}

/** out = (X Y + Y X) / 2 for packed symmetric X, Y; work holds n * n. */
function symmetricProduct(X: Float64Array, Y: Float64Array, out: Float64Array, work: Float64Array, n: number): void {
  const entry = (M: Float64Array, i: number, j: number): number =>
    i === j ? M[(i * (i + 3)) / 2]! : Math.SQRT1_2 * (i > j ? M[(i * (i + 1)) / 2 + j]! : M[(j * (j + 1)) / 2 + i]!);
  for (let i = 0; i < n; i++) {
    for (let j = 0; j < n; j++) {
      let sum = 0;
      for (let l = 0; l < n; l++) sum += entry(X, i, l) * entry(Y, l, j);
      work[i * n + j] = sum;
    }
  }
  for (let i = 0; i < n; i++) for (let j = 0; j < n; j++) out[i * n + j] = (work[i * n + j]! + work[j * n + i]!) / 2;
}
