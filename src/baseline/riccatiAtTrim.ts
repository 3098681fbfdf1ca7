/**
 * Riccati designs at the trim point, as a controls engineer would try them: unit weights on the scaled states, light and
 * equal weights on the inputs, each with a few prescribed degrees of stability. The certifier says what each is worth over
 * the whole envelope.
 */
import type { ControlAffineModel } from "../model/controlAffine.js";
import { identity } from "./metricBlocks.js";
import { riccatiMetric } from "./riccatiMetric.js";
import { trimPoint } from "./trim.js";

export interface RiccatiDesign {
  /** n x n, scaled states. */
  readonly W: Float64Array;
  /** Prescribed degree of stability, 1/s. */
  readonly shift: number;
  /** Weight of the inputs against the states. */
  readonly inputWeight: number;
}

/** Shares of the plant's own scale |A| + |B|. */
const SHIFTS = [0.02, 0.05, 0.1, 0.2, 0.4];
const INPUT_WEIGHTS = [0.1, 1];

/** In a fixed order; without an entry where the equation has no stabilising solution. */
export function riccatiAtTrim(model: ControlAffineModel): RiccatiDesign[] {
  const { n, m } = model;
  const { A, B } = trimPoint(model);
  const scale = Math.max(Math.hypot(...A), Math.hypot(...B));
  return INPUT_WEIGHTS.flatMap((inputWeight) =>
    SHIFTS.flatMap((share): RiccatiDesign[] => {
      const shift = share * scale;
      const weights = identity(m).map((value) => inputWeight * value);
      const result = riccatiMetric(A, B, shift, identity(n), weights);
      return result.status === "solved" ? [{ W: result.W, shift, inputWeight }] : [];
    }),
  );
}
