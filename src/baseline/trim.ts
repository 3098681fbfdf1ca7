/**
 * A trim point for the design of an analytic metric: the middle of the envelope (scaled 0) with the inputs in [-1, 1]^m
 * that make the rates of the active states smallest in least squares. Cyclic positions and a declared heading may move.
 * Coordinate descent on a convex quadratic over a box (Bertsekas, "Nonlinear Programming", 2nd ed., 1999, section 2.7).
 */
import { type ControlAffineModel, newModelPoint } from "../model/controlAffine.js";
import { frameJacobian } from "./conditionSample.js";

export interface Trim {
  /** Scaled inputs, m. */
  readonly inputs: Float64Array;
  /** What is left of the scaled rates of the active states there, 1/s. */
  readonly residualRate: number;
  /** Jacobian of the rates (in the body frame where a rotation is declared), n x n, and B, n x m. */
  readonly A: Float64Array;
  readonly B: Float64Array;
}

const SWEEPS = 200;

export function trimPoint(model: ControlAffineModel): Trim {
  const { n, m, p, active } = model;
  const z = new Float64Array(n);
  const point = newModelPoint(n, m, p);
  model.embed(new Float64Array(active.length), z);
  model.evaluate(z, point);
  const inputs = new Float64Array(m);
  const rate = (i: number): number => {
    let sum = point.f[i]!;
    for (let j = 0; j < m; j++) sum += point.B[i * m + j]! * inputs[j]!;
    return sum;
  };
  for (let sweep = 0; sweep < SWEEPS; sweep++) {
    for (let j = 0; j < m; j++) {
      let slope = 0;
      let square = 0;
      for (const i of active) {
        slope += point.B[i * m + j]! * rate(i);
        square += point.B[i * m + j]! ** 2;
      }
      if (square > 0) inputs[j] = Math.min(1, Math.max(-1, inputs[j]! - slope / square));
    }
  }
  return {
    inputs,
    residualRate: Math.hypot(...active.map(rate)),
    A: frameJacobian(model, point, inputs),
    B: point.B,
  };
}
