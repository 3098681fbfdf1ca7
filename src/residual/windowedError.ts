/**
 * Root mean square over windows of the rates' own residual, per state, SI per second: what a model leaves of
 * (x(t+T) - x(t)) / T. Non-overlapping use is not needed: it compares models on the same windows.
 */
import type { Run } from "../logs/recording.js";
import type { ControlAffineModel } from "../model/controlAffine.js";
import type { Scaling } from "../plant/scaling.js";
import { forEachWindow, leftoverSums } from "./leftover.js";

export interface WindowedError {
  /** n, SI per second. */
  readonly rates: Float64Array;
  /** n, SI per second: the part that no leftover channel explains. */
  readonly outside: Float64Array;
}

export function windowedError(
  model: ControlAffineModel,
  scaling: Scaling,
  runs: readonly Run[],
  window: number,
): WindowedError {
  const { n } = model;
  const squares = { rates: new Float64Array(n), outside: new Float64Array(n) };
  let count = 0;
  for (const run of runs) {
    for (const sums of leftoverSums(model, scaling, run)) {
      for (const kind of ["rates", "outside"] as const) {
        forEachWindow(sums.time, sums[kind], n, window, (mean) => {
          if (kind === "rates") count++;
          for (let i = 0; i < n; i++) squares[kind][i]! += (mean[i]! * scaling.stateHalf[i]!) ** 2;
        });
      }
    }
  }
  const root = (values: Float64Array): Float64Array => values.map((value) => Math.sqrt(value / Math.max(1, count)));
  return { rates: root(squares.rates), outside: root(squares.outside) };
}
