import type { BodyFrame, ControlAffineModel } from "../../src/model/controlAffine.js";
import type { DualMetric } from "../../src/nets/dualMetric.js";
import { handModel } from "../support/handModel.js";

export const vector = (...values: number[]): Float64Array => Float64Array.from(values);

/** A model that only lends its shape. */
export function shape(n: number, rotation?: BodyFrame, headingZero = 0): ControlAffineModel {
  const fixed = rotation === undefined ? [] : [...rotation.position, rotation.heading];
  const active = Array.from({ length: n }, (_, i) => i).filter((i) => !fixed.includes(i));
  const model = handModel({
    n,
    m: 0,
    active,
    ...(rotation === undefined ? {} : { rotation }),
    f: () => Array.from({ length: n }, () => 0),
    B: () => Array.from({ length: n }, () => []),
  });
  return {
    ...model,
    embed: (from, z) => {
      model.embed(from, z);
      if (rotation !== undefined) z[rotation.heading] = headingZero;
    },
  };
}

export const restricted = (metric: DualMetric, dependsOn: number[]): DualMetric => ({ ...metric, dependsOn });

/** x^T a^{-1} x by Gauss-Jordan, written apart from the code under test. */
export function inverseForm(a: readonly (readonly number[])[], x: readonly number[]): number {
  const n = x.length;
  const rows = a.map((row, i) => [...row, x[i]!]);
  for (let i = 0; i < n; i++) {
    for (let k = 0; k < n; k++) {
      if (k === i) continue;
      const factor = rows[k]![i]! / rows[i]![i]!;
      rows[k] = rows[k]!.map((value, j) => value - factor * rows[i]![j]!);
    }
  }
  return rows.reduce((sum, row, i) => sum + (x[i]! * row[n]!) / row[i]!, 0);
}

/** Wz of the 3-state example, as in test/support/handModel.ts. */
export const FLAT = [
  [1.307801, 0.183259, -0.249085],
  [0.183259, 0.723295, 0.080072],
  [-0.249085, 0.080072, 0.658313],
];

/** Squared distance of the 3-state example in scaled states: straight in (x1, x2 + x1^2, x3). */
export function threeStateEnergy(half: number, from: Float64Array, to: Float64Array): number {
  const flat = (z: Float64Array): number[] => [half * z[0]!, half * z[1]! + (half * z[0]!) ** 2, half * z[2]!];
  const [a, b] = [flat(from), flat(to)];
  return (
    inverseForm(
      FLAT,
      b.map((value, i) => value - a[i]!),
    ) /
    half ** 2
  );
}

/** The 3-state example over [-half, half]^3, its input in half-ranges of `reach`; w pushes x3' by w. */
export function drivenThreeState(half: number, reach: number): ControlAffineModel {
  return handModel({
    n: 3,
    m: 1,
    p: 1,
    f: (z) => {
      const [x1, x2, x3] = [half * z[0]!, half * z[1]!, half * z[2]!];
      return [(-x1 + x3) / half, (x1 * x1 - x2 - 2 * x1 * x3 + x3) / half, -x2 / half];
    },
    B: () => [[0], [0], [reach / half]],
    G: () => [[0], [0], [1 / half]],
  });
}
