/**
 * The disturbance bound by split conformal prediction over runs (Vovk, Gammerman and Shafer, "Algorithmic Learning in a
 * Random World", 2005; Lei et al., JASA 113, 2018). Runs, not samples, are exchangeable: the score of a run is its worst
 * window over all channels, each channel divided by its scale on the fit runs; the bound is the
 * ceil((K+1)(1-alpha))-th smallest of the K calibration scores. A new run of the same kind stays below it throughout,
 * as long as it is inside the envelope, with probability at least 1 - alpha over the draw of the runs.
 */
import type { Run } from "../logs/recording.js";
import type { ControlAffineModel } from "../model/controlAffine.js";
import { conformalRank, runsNeeded } from "../num/statistics.js";
import type { Scaling } from "../plant/scaling.js";
import { forEachWindow, leftoverSums } from "./leftover.js";

export interface SplitOfRuns {
  readonly fit: readonly Run[];
  readonly calibration: readonly Run[];
  readonly test: readonly Run[];
}

export interface DisturbanceBound {
  readonly status: "bounded";
  readonly confidence: number;
  readonly calibrationRuns: number;
  readonly rank: number;
  /** s. */
  readonly window: number;
  /** Per leftover channel, SI: its scale on the fit runs and its bound. */
  readonly scale: readonly number[];
  readonly bound: readonly number[];
  /** The conformal quantile of the scores, in units of the scales. */
  readonly quantile: number;
  /** Runs too short to hold a window have no score. */
  readonly scores: { readonly calibration: readonly RunScore[]; readonly test: readonly RunScore[] };
  /** Share of the test runs that stay under the bound throughout. */
  readonly testShareCovered: number;
}

export interface RunScore {
  readonly run: string;
  readonly score: number;
  /** Channel of the worst window. */
  readonly channel: number;
  /** Largest window mean of each channel, SI. */
  readonly peaks: readonly number[];
}

export interface TooFewRuns {
  readonly status: "tooFewRuns";
  readonly calibrationRuns: number;
  readonly runsNeeded: number;
}

export function disturbanceBound(
  model: ControlAffineModel,
  scaling: Scaling,
  split: SplitOfRuns,
  window: number,
  confidence: number,
): DisturbanceBound | TooFewRuns {
  const alpha = 1 - confidence;
  const peaksOf = (run: Run): Float64Array | null => runPeaks(model, scaling, run, window);
  const scale = channelScales(split.fit.map(peaksOf));
  const scoresOf = (runs: readonly Run[]): RunScore[] =>
    runs.flatMap((run) => {
      const peaks = peaksOf(run);
      return peaks === null ? [] : [scoreOf(run, peaks, scale)];
    });
  const calibration = scoresOf(split.calibration);
  const test = scoresOf(split.test);
  const calibrationRuns = calibration.length;
  const rank = conformalRank(calibrationRuns, alpha);
  if (rank === null || scale.length === 0)
    return { status: "tooFewRuns", calibrationRuns, runsNeeded: runsNeeded(alpha) };
  const quantile = calibration.map((entry) => entry.score).sort((a, b) => a - b)[rank - 1]!;
  const covered = test.filter((entry) => entry.score <= quantile).length;
  return {
    status: "bounded",
    confidence,
    calibrationRuns,
    rank,
    window,
    scale,
    bound: scale.map((value) => value * quantile),
    quantile,
    scores: { calibration, test },
    testShareCovered: test.length === 0 ? 1 : covered / test.length,
  };
}

/** Score of a run against the scales of a bound; null for a run too short to hold a window. */
export function scoreRun(
  model: ControlAffineModel,
  scaling: Scaling,
  run: Run,
  { window, scale }: Pick<DisturbanceBound, "window" | "scale">,
): RunScore | null {
  const peaks = runPeaks(model, scaling, run, window);
  return peaks === null ? null : scoreOf(run, peaks, scale);
}

function scoreOf(run: Run, peaks: Float64Array, scale: readonly number[]): RunScore {
  let channel = 0;
  for (let c = 1; c < peaks.length; c++) if (peaks[c]! / scale[c]! > peaks[channel]! / scale[channel]!) channel = c;
  return { run: run.id, score: peaks[channel]! / scale[channel]!, channel, peaks: Array.from(peaks) };
}

/**
 * Largest |window mean| of each channel over the windows of a run that lie inside the envelope throughout, SI; null when
 * there is none. Claims are for the envelope alone, so what the model makes of states beyond it is no matter.
 */
export function runPeaks(model: ControlAffineModel, scaling: Scaling, run: Run, window: number): Float64Array | null {
  const peaks = new Float64Array(model.p);
  let windows = 0;
  for (const { time, channels, strays } of leftoverSums(model, scaling, run)) {
    forEachWindow(time, channels, model.p, window, (mean, start, end) => {
      if (strays[end + 1]! > strays[start]!) return;
      windows++;
      for (let c = 0; c < model.p; c++) peaks[c] = Math.max(peaks[c]!, Math.abs(mean[c]!));
    });
  }
  return windows === 0 ? null : peaks;
}

/** The scale of a channel: the mean of its peaks over the fit runs, so that no channel dominates the score. */
export function channelScales(runs: readonly (Float64Array | null)[]): number[] {
  const peaks = runs.filter((run) => run !== null);
  const p = peaks[0]?.length ?? 0;
  return Array.from({ length: p }, (_, c) => {
    const mean = peaks.reduce((sum, run) => sum + run[c]!, 0) / peaks.length;
    return mean > 0 ? mean : Number.MIN_VALUE;
  });
}
