/**
 * Does an earlier fit still cover new runs? Exact in finite samples, and without a model of the noise: while nothing has
 * changed, the scores of new runs and of the earlier held-out runs are exchangeable (rankTest.ts). One p-value a run, one
 * for all new runs together, and one a channel (Holm), by ranks of the run's worst window.
 */
import type { Run } from "../logs/recording.js";
import type { ControlAffineModel } from "../model/controlAffine.js";
import { conformalPValue, holmAdjusted, rankSumPValue } from "../num/rankTest.js";
import type { Scaling } from "../plant/scaling.js";
import { type ChangeReading, changeKind } from "./changeKind.js";
import { type DisturbanceBound, type RunScore, scoreRun } from "./disturbanceBound.js";

export interface HeldOutRun {
  readonly score: number;
  /** Largest window mean of each channel, SI. */
  readonly peaks: readonly number[];
}

export interface DriftedChannel {
  readonly channel: number;
  /** Holm-adjusted over the channels. */
  readonly pValue: number;
  readonly isMoved: boolean;
  /** Median peak of the new runs over that of the earlier ones. */
  readonly growth: number;
  /** Null where the channel did not move. */
  readonly reading: ChangeReading | null;
}

export interface Drift {
  /** False alarms happen at most at this share of unchanged fleets. */
  readonly level: number;
  readonly earlierRuns: number;
  readonly runs: readonly (RunScore & { readonly pValue: number; readonly isUnderBound: boolean })[];
  readonly pValue: number;
  readonly isChanged: boolean;
  readonly channels: readonly DriftedChannel[];
}

/** New runs that are read for what a change is made of. */
const READ_RUNS = 24;

/** Throws nothing; runs too short for a window have no score and are left out. */
export function driftOf(
  model: ControlAffineModel,
  scaling: Scaling,
  fresh: readonly Run[],
  earlier: readonly HeldOutRun[],
  bound: Pick<DisturbanceBound, "window" | "scale" | "quantile">,
  level: number,
): Drift {
  const scored = fresh.flatMap((run) => {
    const score = scoreRun(model, scaling, run, bound);
    return score === null ? [] : [{ run, score }];
  });
  const reference = earlier.map(({ score }) => score);
  const pValue = rankSumPValue(
    scored.map(({ score }) => score.score),
    reference,
  );
  const perChannel = holmAdjusted(
    bound.scale.map((_, c) =>
      rankSumPValue(
        scored.map(({ score }) => score.peaks[c]!),
        earlier.map(({ peaks }) => peaks[c]!),
      ),
    ),
  );
  const runs = scored.slice(0, READ_RUNS).map(({ run }) => run);
  return {
    level,
    earlierRuns: earlier.length,
    runs: scored.map(({ score }) => ({
      ...score,
      pValue: conformalPValue(score.score, reference),
      isUnderBound: score.score <= bound.quantile,
    })),
    pValue,
    isChanged: pValue <= level,
    channels: perChannel.map((adjusted, channel) => {
      const isMoved = adjusted <= level;
      return {
        channel,
        pValue: adjusted,
        isMoved,
        growth:
          median(scored.map(({ score }) => score.peaks[channel]!)) /
          median(earlier.map(({ peaks }) => peaks[channel]!)),
        reading: isMoved ? changeKind(model, scaling, runs, bound.window, channel) : null,
      };
    }),
  };
}

function median(values: readonly number[]): number {
  return [...values].sort((a, b) => a - b)[values.length >> 1] ?? Number.NaN;
}
