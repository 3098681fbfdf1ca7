/**
 * Sampled evidence for one certificate: every infimum and supremum of the tube over the box, by low-discrepancy points
 * and ascent. It finds failures; it never shows that there are none.
 */
import type { ControlAffineModel } from "../model/controlAffine.js";
import type { DualMetric } from "../nets/dualMetric.js";
import { type Condition, condition } from "./condition.js";
import { type Extreme, largest, ranked, refined, type ScanOptions, scan, valuesAt } from "./extreme.js";
import type { BatchRates } from "./kernel/batchRates.js";
import { scanPoints } from "./scanPoints.js";
import { type MarginDirection, spread } from "./spread.js";

export interface SurveyedState {
  /** Active coordinates. */
  readonly at: Float64Array;
  readonly rate: number;
  /** Index of the worst input corner. */
  readonly corner: number;
}

export interface Survey {
  readonly condition: Condition;
  /** The least pointwise rate found (1/s); -Infinity where W is not positive definite. */
  readonly worst: SurveyedState;
  /** Every scan point whose rate is below `rate`, worst first, at most `most`. */
  violations(rate: number, most: number): SurveyedState[];
  sigma(wbar: Float64Array): Extreme;
  spread(direction: MarginDirection): Extreme;
  authorityDensity(rate: number): Extreme;
}

export interface SurveyOptions {
  /** Sobol points of the full scans; the authority curve scans an eighth of them. */
  readonly points: number;
  readonly starts: number;
}

const TOLERANCE = 1e-5;

/** batch: rates of many points at once, where there is such a kernel; else each is evaluated by itself. */
export function survey(
  model: ControlAffineModel,
  metric: DualMetric,
  { points, starts }: SurveyOptions,
  batch: BatchRates | null = null,
): Survey {
  const here = condition(model, metric);
  const dimension = model.active.length;
  const full: ScanOptions = { dimension, points: scanPoints(dimension, points), starts, tolerance: TOLERANCE };
  const coarse: ScanOptions = {
    ...full,
    points: scanPoints(dimension, Math.ceil(points / 8)),
    starts: Math.min(3, starts),
  };
  /** A value at a state; the worst possible where W is not positive definite. */
  const at =
    (value: () => number) =>
    (active: Float64Array): number =>
      here.moveTo(active) ? value() : Number.POSITIVE_INFINITY;

  const negativeRate = at(() => -here.rate().rate);
  const scanned = batch === null ? valuesAt(negativeRate, full) : batch(full.points).map((rate) => -rate);
  const slowest = ranked(scanned, full);
  const slow = refined(negativeRate, slowest, full);
  /** The gain grows without end towards the slowest states: they are searched from as well. */
  const densest = (density: (active: Float64Array) => number): Extreme => {
    const hints = [slow, ...slowest].map((state) => ({ at: state.at, value: density(state.at) }));
    const best = [...scan(density, coarse), ...hints].sort((a, b) => b.value - a.value).slice(0, coarse.starts + 1);
    return refined(density, best, coarse);
  };
  const surveyed = (active: Float64Array): SurveyedState => {
    const isDefinite = here.moveTo(active);
    const { rate, corner } = isDefinite ? here.rate() : { rate: Number.NEGATIVE_INFINITY, corner: 0 };
    return { at: active, rate, corner };
  };
  return {
    condition: here,
    worst: surveyed(slow.at),
    violations: (rate, most) =>
      ranked(scanned, { ...full, starts: most })
        .filter((state) => -state.value < rate)
        .map((state) => surveyed(state.at)),
    sigma: (wbar) =>
      largest(
        at(() => here.sigma(wbar)),
        full,
      ),
    spread: (direction) =>
      largest(
        at(() => spread(here.W, model.n, model.rotation, direction)),
        full,
      ),
    authorityDensity: (rate) => densest(at(() => here.authorityDensity(rate))),
  };
}
