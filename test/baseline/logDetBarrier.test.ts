import { EigenvalueDecomposition, Matrix } from "ml-matrix";
import { describe, expect, it } from "vitest";
import { type Block, minimise, relativeGap } from "../../src/baseline/logDetBarrier.js";
import { seededRandom } from "../../src/num/random.js";

const options = relativeGap(1e-9);
const flat = (rows: number[][]): Float64Array => Float64Array.from(rows.flat());
const block = (constant: number[][], ...terms: [number, number[][]][]): Block => ({
  size: constant.length,
  constant: flat(constant),
  terms: terms.map(([variable, matrix]) => ({ variable, matrix: flat(matrix) })),
});
const eye = (n: number): number[][] => Matrix.eye(n).to2DArray();

describe("closed forms", () => {
  it("largest eigenvalue: min s, s I >= A", () => {
    const random = seededRandom(3);
    for (let trial = 0; trial < 20; trial++) {
      const n = 2 + random.integer(5);
      const R = new Matrix(Array.from({ length: n }, () => Array.from({ length: n }, () => random.normal())));
      const A = Matrix.add(R, R.transpose());
      const top = Math.max(...new EigenvalueDecomposition(A).realEigenvalues);
      const result = minimise(
        Float64Array.of(1),
        [block(A.clone().mul(-1).to2DArray(), [0, eye(n)])],
        Float64Array.of(100),
        options,
      );
      expect(result.status).toBe("solved");
      expect(result.gap).toBeLessThan(2e-9 * (1 + Math.abs(top)) * 2);
      expect(result.value - top).toBeGreaterThan(-1e-12);
      expect(result.value - top).toBeLessThanOrEqual(result.gap! + 1e-12);
    }
  });
  it("matrix-fractional: min g^T W^-1 g with W <= D is g^T D^-1 g", () => {
    // variables: t, w00, w01, w11
    const g = [1, 2];
    const D = [
      [2, 0.5],
      [0.5, 1],
    ];
    const E = (i: number, j: number): number[][] =>
      [0, 1].map((r) => [0, 1].map((c) => ((r === i && c === j) || (r === j && c === i) ? 1 : 0)));
    const pad = (M: number[][]): number[][] => [
      [0, 0, 0],
      [0, ...M[0]!],
      [0, ...M[1]!],
    ];
    const blocks = [
      block(
        [
          [0, g[0]!, g[1]!],
          [g[0]!, 0, 0],
          [g[1]!, 0, 0],
        ],
        [
          0,
          [
            [1, 0, 0],
            [0, 0, 0],
            [0, 0, 0],
          ],
        ],
        [1, pad(E(0, 0))],
        [2, pad(E(0, 1))],
        [3, pad(E(1, 1))],
      ),
      block(
        D,
        [1, E(0, 0).map((r) => r.map((v) => -v))],
        [2, E(0, 1).map((r) => r.map((v) => -v))],
        [3, E(1, 1).map((r) => r.map((v) => -v))],
      ),
    ];
    const result = minimise(Float64Array.of(1, 0, 0, 0), blocks, Float64Array.of(100, 0.5, 0, 0.5), options);
    const expected = Matrix.rowVector(g)
      .mmul(
        new Matrix([
          [1, -0.5],
          [-0.5, 2],
        ]).div(1.75),
      )
      .mmul(Matrix.columnVector(g))
      .get(0, 0);
    expect(result.value).toBeCloseTo(expected, 7);
    expect(result.value - expected).toBeLessThanOrEqual(result.gap! + 1e-9);
  });
  it("Lyapunov: least trace P with A^T P + P A + Q <= 0 is the solution of the equation", () => {
    // A = diag(-1, -2), Q = I: P = diag(1/2, 1/4)
    const blocks = [
      block(
        [
          [-1, 0],
          [0, -1],
        ],
        [
          0,
          [
            [2, 0],
            [0, 0],
          ],
        ],
        [
          1,
          [
            [0, 3],
            [3, 0],
          ],
        ],
        [
          2,
          [
            [0, 0],
            [0, 4],
          ],
        ],
      ),
    ];
    const result = minimise(Float64Array.of(1, 0, 1), blocks, Float64Array.of(3, 0, 3), options);
    expect(result.x[0]).toBeCloseTo(0.5, 6);
    expect(result.x[1]).toBeCloseTo(0, 6);
    expect(result.x[2]).toBeCloseTo(0.25, 6);
  });
  it("the triangle's max-cut bound is 9/4", () => {
    // dual: min sum y, Diag(y) >= C, C = (1/4)(diag(A 1) - A) of the 3-cycle; known value 9/4 (Delorme and Poljak 1993)
    const C = [
      [0.5, -0.25, -0.25],
      [-0.25, 0.5, -0.25],
      [-0.25, -0.25, 0.5],
    ];
    const one = (i: number): number[][] => [0, 1, 2].map((r) => [0, 1, 2].map((c) => (r === i && c === i ? 1 : 0)));
    const result = minimise(
      Float64Array.of(1, 1, 1),
      [
        block(
          C.map((r) => r.map((v) => -v)),
          [0, one(0)],
          [1, one(1)],
          [2, one(2)],
        ),
      ],
      Float64Array.of(5, 5, 5),
      options,
    );
    expect(result.value).toBeCloseTo(2.25, 7);
  });
});

it("refuses a start outside, and prints no gap for it", () => {
  const result = minimise(Float64Array.of(1), [block([[-1]], [0, [[1]]])], Float64Array.of(0.5), options);
  expect(result.status).toBe("infeasibleStart");
  expect(result.gap).toBeNull();
});

it("an unbounded program is never called centred", () => {
  const result = minimise(Float64Array.of(-1), [block([[1]], [0, [[1]]])], Float64Array.of(0), options);
  expect(result.status).toBe("stalled");
});
