/**
 * Counted evidence: N fresh random states, uniform over the box, drawn after everything is frozen, and one joint event:
 * any claim fails there. The Clopper-Pearson limit bounds the volume share where a claim fails, never a supremum.
 */
import type { Random } from "../num/random.js";
import { clopperPearsonUpper } from "../num/statistics.js";

export interface CountedEvidence {
  readonly points: number;
  readonly failures: number;
  readonly confidence: number;
  /** Upper limit of the failing share. */
  readonly failingShareUpper: number;
}

export function countFailures(
  fails: (at: Float64Array) => boolean,
  dimension: number,
  points: number,
  confidence: number,
  random: Random,
): CountedEvidence {
  const at = new Float64Array(dimension);
  let failures = 0;
  for (let i = 0; i < points; i++) {
    for (let d = 0; d < dimension; d++) at[d] = 2 * random.uniform() - 1;
    if (fails(at)) failures++;
  }
  return { points, failures, confidence, failingShareUpper: clopperPearsonUpper(failures, points, confidence) };
}
