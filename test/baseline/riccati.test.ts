import { EigenvalueDecomposition, Matrix } from "ml-matrix";
import { describe, expect, it } from "vitest";
import { lyapunov, riccati } from "../../src/baseline/riccati.js";

const solution = (A: number[][], G: Matrix, Q: number[][]): Matrix => {
  const result = riccati(new Matrix(A), G, new Matrix(Q));
  if (result.status !== "solved") throw new Error(result.reason);
  return result.X;
};
const outer = (b: number[], r = 1): Matrix => Matrix.columnVector(b).mmul(Matrix.rowVector(b)).div(r);
const near = (X: Matrix, expected: number[][], tolerance: number): void => {
  const E = new Matrix(expected);
  expect(Matrix.sub(X, E).norm() / E.norm()).toBeLessThan(tolerance);
};

// CAREX: Abels and Benner, "CAREX - A collection of benchmark examples for continuous-time algebraic Riccati equations",
// SLICOT Working Note 1999-14; closed forms as in SLICOT's reference program BB01AD.
describe("CAREX closed forms", () => {
  it("1.1", () =>
    near(
      solution(
        [
          [0, 1],
          [0, 0],
        ],
        outer([0, 1]),
        [
          [1, 0],
          [0, 2],
        ],
      ),
      [
        [2, 1],
        [1, 2],
      ],
      1e-13,
    ));
  it("1.2", () => {
    const k = 1 + Math.SQRT2;
    near(
      solution(
        [
          [4, 3],
          [-4.5, -3.5],
        ],
        outer([1, -1]),
        [
          [9, 6],
          [6, 4],
        ],
      ),
      [
        [9 * k, 6 * k],
        [6 * k, 4 * k],
      ],
      1e-11,
    );
  });
  it.each([1, 1e-2])("2.1, e = %d", (e) => {
    const t = Math.sqrt(1 + e * e);
    const x12 = 1 / (2 + t);
    near(
      solution(
        [
          [1, 0],
          [0, -2],
        ],
        outer([e, 0]),
        [
          [1, 1],
          [1, 1],
        ],
      ),
      [
        [(1 + t) / e ** 2, x12],
        [x12, (1 - (e * x12) ** 2) / 4],
      ],
      1e-9,
    );
  });
  it.each([1, 100, 1e-3])("2.3, e = %d", (e) => {
    const t = Math.sqrt(1 + 2 * e);
    near(
      solution(
        [
          [0, e],
          [0, 0],
        ],
        outer([0, 1]),
        [
          [1, 0],
          [0, 1],
        ],
      ),
      [
        [t / e, 1],
        [1, t],
      ],
      1e-11,
    );
  });
  it.each([1, 1e-3])("2.4 with Q = e^2 I, e = %d", (e) => {
    const a = 1 + e;
    const x11 = (2 * a + Math.SQRT2 * (Math.sqrt(a * a + 1) + e)) / 2;
    const x12 = x11 / (x11 - a);
    near(
      solution(
        [
          [a, 1],
          [1, a],
        ],
        Matrix.eye(2),
        [
          [e * e, 0],
          [0, e * e],
        ],
      ),
      [
        [x11, x12],
        [x12, x11],
      ],
      1e-9,
    );
  });
  it.each([1, 1e-2])("2.5, e = %d", (e) => {
    const Q = [
      [4 * e - 11, 2 * e - 5],
      [2 * e - 5, 2 * e - 2],
    ];
    near(
      solution(
        [
          [3 - e, 1],
          [4, 2 - e],
        ],
        outer([1, 1]),
        Q,
      ),
      [
        [2, 1],
        [1, 1],
      ],
      1e-8,
    );
  });
  it.each([1, 100])("2.6, e = %d", (e) => {
    const V = Matrix.sub(Matrix.eye(3), Matrix.ones(3, 3).mul(2 / 3));
    const A = V.mmul(Matrix.diag([1, 2, 3]).mul(e)).mmul(V);
    const Q = V.mmul(Matrix.diag([1 / e, 1, e])).mmul(V);
    const x = [
      e * e + Math.sqrt(e ** 4 + 1),
      2 * e * e + Math.sqrt(4 * e ** 4 + e),
      3 * e * e + e * Math.sqrt(9 * e * e + 1),
    ];
    const X = solution(A.to2DArray(), Matrix.eye(3).div(e), Q.to2DArray());
    near(X, V.mmul(Matrix.diag(x)).mmul(V).to2DArray(), 1e-11);
  });
  it("3.2, n = 64", () => {
    const n = 64;
    const A = Matrix.zeros(n, n);
    for (let i = 0; i < n; i++) {
      A.set(i, i, -2);
      A.set(i, (i + 1) % n, 1);
      A.set(i, (i + n - 1) % n, 1);
    }
    const X = solution(A.to2DArray(), Matrix.eye(n), Matrix.eye(n).to2DArray());
    for (const [j, value] of [0.37884325, 0.18581947, 0.08113776].entries()) expect(X.get(0, j)).toBeCloseTo(value, 8);
  });
});

describe("the 3-state example at the origin (recomputed; see check-values)", () => {
  const A = [
    [-1, 0, 1],
    [0, -1, 1],
    [0, -1, 0],
  ];
  it("LQR with Q = I, R = 1", () => {
    const X = solution(A, outer([0, 0, 1]), Matrix.eye(3).to2DArray());
    near(
      X,
      [
        [0.48, -0.08, 0.2],
        [-0.08, 0.68, -0.2],
        [0.2, -0.2, 1],
      ],
      1e-12,
    );
  });
  it("shifted by 0.5: its inverse is Wz", () => {
    const shifted = Matrix.add(new Matrix(A), Matrix.eye(3).mul(0.5));
    const X = solution(shifted.to2DArray(), outer([0, 0, 1]), Matrix.eye(3).to2DArray());
    const Wz = [
      [1.307801, 0.183259, -0.249085],
      [0.183259, 0.723295, 0.080072],
      [-0.249085, 0.080072, 0.658313],
    ];
    near(X.mmul(new Matrix(Wz)), Matrix.eye(3).to2DArray(), 2e-6);
  });
});

it("Lyapunov: the solution satisfies its equation, and an unstable matrix has none", () => {
  const A = new Matrix([
    [-1, 2, 0],
    [0, -3, 1],
    [0.5, 0, -2],
  ]);
  const X = lyapunov(A, Matrix.eye(3))!;
  expect(Matrix.add(A.transpose().mmul(X), X.mmul(A)).add(Matrix.eye(3)).norm()).toBeLessThan(1e-13);
  expect(new EigenvalueDecomposition(X).realEigenvalues.every((value) => value > 0)).toBe(true);
  expect(
    lyapunov(
      new Matrix([
        [1, 0],
        [0, -1],
      ]),
      Matrix.eye(2),
    ),
  ).toBeNull();
});

it("says so when there is no stabilising solution", () => {
  // an unstable mode that no input reaches
  expect(
    riccati(
      new Matrix([
        [1, 0],
        [0, -1],
      ]),
      outer([0, 1]),
      Matrix.eye(2),
    ).status,
  ).toBe("noStabilisingSolution");
});
