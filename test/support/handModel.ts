import type { BodyFrame, ControlAffineModel } from "../../src/model/controlAffine.js";
import type { DualMetric } from "../../src/nets/dualMetric.js";

/** A model given by plain functions of the scaled state; Jacobians by central differences (exact for quadratics). */
export function handModel(parts: {
  n: number;
  m: number;
  p?: number;
  f: (z: Float64Array) => number[];
  B: (z: Float64Array) => number[][];
  G?: (z: Float64Array) => number[][];
  active?: number[];
  rotation?: BodyFrame;
  step?: number;
}): ControlAffineModel {
  const { n, m, f, B } = parts;
  const p = parts.p ?? 0;
  const h = parts.step ?? 1e-4;
  const active = parts.active ?? Array.from({ length: n }, (_, i) => i);
  return {
    n,
    m,
    p,
    active,
    rotation: parts.rotation ?? null,
    embed: (from, z) => {
      z.fill(0);
      active.forEach((state, i) => {
        z[state] = from[i]!;
      });
    },
    evaluate: (z, out) => {
      out.f.set(f(z));
      out.B.set(B(z).flat());
      if (parts.G) out.G.set(parts.G(z).flat());
      for (let k = 0; k < n; k++) {
        const up = z.slice();
        const down = z.slice();
        up[k]! += h;
        down[k]! -= h;
        const [fu, fd, Bu, Bd] = [f(up), f(down), B(up), B(down)];
        for (let i = 0; i < n; i++) {
          out.dfdx[i * n + k] = (fu[i]! - fd[i]!) / (2 * h);
          for (let j = 0; j < m; j++) out.dBdx[j * n * n + i * n + k] = (Bu[i]![j]! - Bd[i]![j]!) / (2 * h);
        }
      }
    },
  };
}

/** A metric given by a function; tangents by central differences. */
export function handMetric(n: number, W: (z: Float64Array) => number[][], step = 1e-4): DualMetric {
  return {
    n,
    dependsOn: Array.from({ length: n }, (_, i) => i),
    evaluate: (z, directions, count, out, dOut) => {
      out.set(W(z).flat());
      for (let c = 0; c < count; c++) {
        const shifted = (sign: number): number[] =>
          W(z.map((value, i) => value + sign * step * directions[c * n + i]!)).flat();
        const [up, down] = [shifted(1), shifted(-1)];
        for (let i = 0; i < n * n; i++) dOut[c * n * n + i] = (up[i]! - down[i]!) / (2 * step);
      }
    },
  };
}

export const constantMetric = (W: number[][]): DualMetric => handMetric(W.length, () => W);

/** The controlled 3-state example of IEEE TAC 62(5), 2017 over [-half, half]^3 (dynamics from memory, see the test). */
export function threeStateModel(half: number): ControlAffineModel {
  return handModel({
    n: 3,
    m: 1,
    p: 1,
    f: (z) => {
      const [x1, x2, x3] = [half * z[0]!, half * z[1]!, half * z[2]!];
      return [(-x1 + x3) / half, (x1 * x1 - x2 - 2 * x1 * x3 + x3) / half, -x2 / half];
    },
    B: () => [[0], [0], [1]],
    G: () => [[1], [0], [0]],
    step: 1e-3,
  });
}

/** W = T^-1 Wz T^-T in scaled states, T = [[1,0,0],[2 x1,1,0],[0,0,1]], Wz for the shifted Riccati equation at 0.5. */
export function threeStateMetric(half: number): DualMetric {
  const Wz = [
    [1.307801, 0.183259, -0.249085],
    [0.183259, 0.723295, 0.080072],
    [-0.249085, 0.080072, 0.658313],
  ];
  return handMetric(
    3,
    (z) => {
      const s = -2 * half * z[0]!;
      const row = (i: number): number[] =>
        i === 1 ? [s * Wz[0]![0]! + Wz[1]![0]!, s * Wz[0]![1]! + Wz[1]![1]!, s * Wz[0]![2]! + Wz[1]![2]!] : Wz[i]!;
      const left = [row(0), row(1), row(2)];
      return left.map((r) => [r[0]!, s * r[0]! + r[1]!, r[2]!]);
    },
    1e-3,
  );
}
