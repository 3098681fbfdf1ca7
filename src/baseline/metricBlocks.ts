/**
 * The linear matrix inequalities of the constant-metric problem (constantMetric.ts). W (n x n, symmetric) stands in the
 * variables from `first`, by lower rows.
 */
import { congruence } from "../num/dense.js";
import type { Block } from "./semidefiniteBlock.js";

type Term = Block["terms"][number];

export interface MetricBlocks {
  /** Number of all variables. */
  readonly size: number;
  /** W of an x, n x n. */
  read(x: Float64Array): Float64Array;
  write(W: Float64Array, x: Float64Array): void;
  /** rho B B^T - K W - W K^T - 2 rate W >= 0, `gram` = B B^T. */
  condition(K: Float64Array, rate: number, gram: Float64Array, rho: number): Block;
  /** q I - P^T (K W + W K^T + 2 rate W) P >= 0 for P (n x k) with orthonormal columns. */
  projected(K: Float64Array, rate: number, P: Float64Array, k: number, q: number): Block;
  /** W - y gram >= 0, `gram` = X X^T: X^T W^-1 X <= I / y. */
  exceeds(gram: Float64Array, y: number): Block;
  /** bound I - C^T W C >= 0 for C (n x k). */
  spread(C: Float64Array, k: number, bound: number): Block;
  /** bound I - W >= 0. */
  below(bound: number): Block;
  /** W >= 0. */
  positive(): Block;
}

export function metricBlocks(n: number, first: number): MetricBlocks {
  const at = (i: number, j: number): number => first + (i >= j ? (i * (i + 1)) / 2 + j : (j * (j + 1)) / 2 + i);
  /** One term a variable of W: its unit matrix (symmetric pair a, b) as it enters a block of some size. */
  const terms = (size: number, place: (a: number, b: number, matrix: Float64Array) => void): Term[] => {
    const out: Term[] = [];
    for (let a = 0; a < n; a++) {
      for (let b = 0; b <= a; b++) {
        const matrix = new Float64Array(size * size);
        place(a, b, matrix);
        out.push({ variable: at(a, b), matrix });
      }
    }
    return out;
  };
  const whole = (sign: number): Term[] =>
    terms(n, (a, b, matrix) => {
      matrix[a * n + b] = matrix[b * n + a] = sign;
    });
  /** -(K E + E K^T + 2 rate E) for the unit matrix E of the pair (a, b). */
  const addCondition = (K: Float64Array, rate: number, a: number, b: number, matrix: Float64Array): void => {
    const subtract = (i: number, j: number, value: number): void => {
      matrix[i * n + j]! -= value;
      matrix[j * n + i]! -= value;
    };
    for (let i = 0; i < n; i++) {
      subtract(i, b, K[i * n + a]!);
      if (a !== b) subtract(i, a, K[i * n + b]!);
    }
    if (a === b) matrix[a * n + a]! -= 2 * rate;
    else subtract(a, b, 2 * rate);
  };
  return {
    size: first + (n * (n + 1)) / 2,
    read: (x) => Float64Array.from({ length: n * n }, (_, k) => x[at(Math.floor(k / n), k % n)]!),
    write: (W, x) => {
      for (let i = 0; i < n; i++) for (let j = 0; j <= i; j++) x[at(i, j)] = W[i * n + j]!;
    },
    condition: (K, rate, gram, rho) => ({
      size: n,
      constant: new Float64Array(n * n),
      terms: [{ variable: rho, matrix: gram }, ...terms(n, (a, b, matrix) => addCondition(K, rate, a, b, matrix))],
    }),
    projected: (K, rate, P, k, q) => {
      const full = new Float64Array(n * n);
      const work = new Float64Array(n * k);
      return {
        size: k,
        constant: new Float64Array(k * k),
        terms: [
          { variable: q, matrix: identity(k) },
          ...terms(k, (a, b, matrix) => {
            full.fill(0);
            addCondition(K, rate, a, b, full);
            congruence(full, P, matrix, n, k, work);
          }),
        ],
      };
    },
    exceeds: (gram, y) => ({
      size: n,
      constant: new Float64Array(n * n),
      terms: [{ variable: y, matrix: gram.map((value) => -value) }, ...whole(1)],
    }),
    spread: (C, k, bound) => {
      const unit = new Float64Array(n * n);
      const work = new Float64Array(n * k);
      return {
        size: k,
        constant: identity(k).map((value) => bound * value),
        terms: terms(k, (a, b, matrix) => {
          unit.fill(0);
          unit[a * n + b] = unit[b * n + a] = -1;
          congruence(unit, C, matrix, n, k, work);
        }),
      };
    },
    below: (bound) => ({ size: n, constant: identity(n).map((value) => bound * value), terms: whole(-1) }),
    positive: () => ({ size: n, constant: new Float64Array(n * n), terms: whole(1) }),
  };
}

/** A small block of numbers: constant + sum x_v matrix_v >= 0. */
export function smallBlock(
  constant: readonly number[],
  ...entries: readonly (readonly [number, readonly number[]])[]
): Block {
  return {
    size: Math.sqrt(constant.length),
    constant: Float64Array.from(constant),
    terms: entries.map(([variable, matrix]) => ({ variable, matrix: Float64Array.from(matrix) })),
  };
}

/** a b - c^2 >= 0 for variables a, b, c with a, b >= 0. */
export function rotatedCone(a: number, b: number, c: number): Block {
  return smallBlock([0, 0, 0, 0], [a, [1, 0, 0, 0]], [b, [0, 0, 0, 1]], [c, [0, 1, 1, 0]]);
}

export function identity(n: number): Float64Array {
  return Float64Array.from({ length: n * n }, (_, k) => (k % (n + 1) === 0 ? 1 : 0));
}

/** X X^T for X (n x k). */
export function gram(X: Float64Array, n: number, k: number): Float64Array {
  const out = new Float64Array(n * n);
  for (let i = 0; i < n; i++) {
    for (let j = 0; j < n; j++) for (let l = 0; l < k; l++) out[i * n + j]! += X[i * k + l]! * X[j * k + l]!;
  }
  return out;
}
