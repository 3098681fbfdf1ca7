/**
 * One certificate from a metric: survey it, choose the tube's rate, refine the suprema there, count once, and say what
 * it is worth. Verifier and tube meet here only.
 */
import type { ControlAffineModel } from "../model/controlAffine.js";
import { type DualMetricFile, dualMetric } from "../nets/dualMetric.js";
import type { Random } from "../num/random.js";
import type { MarginGoal, Plant } from "../plant/plant.js";
import { type CertificateExtremes, chooseRate, type RateChoice, type TradeOffPoint } from "../tube/chooseRate.js";
import { tubeRadius } from "../tube/tube.js";
import { type CountedEvidence, countFailures } from "../verify/counted.js";
import { batchRates } from "../verify/kernel/batchRates.js";
import { aloneIn } from "../verify/proof/claims.js";
import { type MarginDirection, spread } from "../verify/spread.js";
import { type Survey, survey } from "../verify/survey.js";

/** What a tube is asked for. */
export interface TubeQuestion {
  /** Bound of each leftover channel, SI. */
  readonly wbar: Float64Array;
  readonly window: number;
  readonly goal: MarginGoal;
  readonly authorityLimit: number;
  readonly roomLimit: number;
  readonly initialDistance: number;
  readonly rate: number | null;
}

export function tubeQuestion(
  { settings }: Plant,
  { wbar, window }: Pick<TubeQuestion, "wbar" | "window">,
): TubeQuestion {
  const { goal, authorityLimit, roomLimit, initialDistance, rate } = settings;
  return { wbar, window, goal, authorityLimit, roomLimit, initialDistance, rate };
}

export interface Certification {
  readonly survey: Survey;
  readonly choice: RateChoice;
  /** Null unless a rate was chosen and the claims survived. */
  readonly tube: CertifiedTube | null;
  readonly counted: CountedEvidence | null;
}

export interface CertifiedTube {
  readonly rate: number;
  readonly radius: number;
  /** Claimed sup of wbar_i sqrt(g_i^T W^{-1} g_i), one a leftover channel, 1/s; sigma is their sum. */
  readonly pushes: readonly number[];
  readonly sigma: number;
  readonly authority: number;
  readonly authorityDensity: number;
  /** The slowest pointwise rate that is claimed, 1/s: above `rate`. */
  readonly claimedRate: number;
  /** Claimed sup of c^T W c: the states in order, then planar, along and across where a rotation is declared. */
  readonly spreads: readonly { readonly direction: MarginDirection; readonly value: number }[];
  readonly headingError: number;
}

const SURVEY = { points: 4096, starts: 8 };
/** A sampled supremum may miss the true one by a little: every one enters the tube this much worse, at least. */
export const SAMPLED_ALLOWANCE = 0.01;
const COUNTED_POINTS = 20_000;
const COUNTED_CONFIDENCE = 0.999;

export function certifyMetric(
  model: ControlAffineModel,
  file: DualMetricFile,
  question: TubeQuestion,
  allowance: number,
  random: Random,
): Certification {
  const seen = survey(model, dualMetric(file), SURVEY, batchRates(model, file));
  const extremes = sampledExtremes(model, seen, question, allowance);
  const choice = chooseRate(extremes, question);
  if (choice.status !== "chosen") return { survey: seen, choice, tube: null, counted: null };
  const tube = tubeAt(model, extremes, choice.point, question);
  const counted = countClaims(model, seen, tube, question, random);
  return { survey: seen, choice, tube, counted };
}

interface SampledExtremes extends CertificateExtremes {
  readonly pushes: readonly number[];
  readonly spread: (direction: MarginDirection) => number;
}

/** Each sampled extreme, worse by the allowance. */
export function sampledExtremes(
  model: ControlAffineModel,
  seen: Survey,
  { wbar, goal }: TubeQuestion,
  allowance: number,
): SampledExtremes {
  const worse = (value: number): number => value * (1 + allowance);
  const known = new Map<string, number>();
  const spreadOf = (direction: MarginDirection): number => {
    const key = JSON.stringify(direction);
    const value = known.get(key) ?? worse(seen.spread(direction).value);
    known.set(key, value);
    return value;
  };
  // within a window of the bound each channel may be worst at a state of its own
  const pushes = aloneIn(Array.from(wbar)).map((alone) => worse(seen.sigma(Float64Array.from(alone)).value));
  return {
    // infinite where as many inputs as states leave nothing to contract
    usableRate: Number.isFinite(seen.worst.rate)
      ? seen.worst.rate - allowance * Math.abs(seen.worst.rate)
      : seen.worst.rate,
    pushes,
    sigma: sumOf(pushes),
    authorityDensity: (rate) => worse(seen.authorityDensity(rate).value),
    goalSpread: (radius) => spreadOf(goalDirection(goal, headingErrorOf(model, radius, spreadOf))),
    widestSpread: model.active.reduce((most, state) => Math.max(most, spreadOf({ kind: "state", state })), 0),
    spread: spreadOf,
  };
}

/** Largest angle between the actual and the planned heading inside a tube, rad; 0 without a rotation. */
function headingErrorOf(
  model: ControlAffineModel,
  radius: number,
  spreadOf: (direction: MarginDirection) => number,
): number {
  if (model.rotation === null) return 0;
  const scaled = radius * Math.sqrt(spreadOf({ kind: "state", state: model.rotation.heading }));
  return Math.min(Math.PI / 2, scaled * model.rotation.headingHalf);
}

/** The direction of the asked margin; headingError in rad widens along and across. */
export function goalDirection(goal: MarginGoal, headingError: number): MarginDirection {
  if (goal.kind === "state" || goal.kind === "planar") return goal as MarginDirection;
  return { kind: goal.kind, headingError };
}

function tubeAt(
  model: ControlAffineModel,
  extremes: SampledExtremes,
  point: TradeOffPoint,
  { window, initialDistance }: TubeQuestion,
): CertifiedTube {
  const { pushes, sigma, usableRate } = extremes;
  const radius = tubeRadius({ window, sigma }, point.rate, initialDistance);
  const headingError = headingErrorOf(model, radius, extremes.spread);
  const states: MarginDirection[] = Array.from({ length: model.n }, (_, state) => ({ kind: "state", state }));
  const planar: MarginDirection[] =
    model.rotation === null
      ? []
      : [{ kind: "planar" }, { kind: "along", headingError }, { kind: "across", headingError }];
  const authorityDensity = extremes.authorityDensity(point.rate);
  return {
    rate: point.rate,
    claimedRate: Number.isFinite(usableRate) ? usableRate : 2 * point.rate,
    radius,
    pushes,
    sigma,
    authority: (radius * authorityDensity) / 2,
    authorityDensity,
    spreads: [...states, ...planar].map((direction) => ({ direction, value: extremes.spread(direction) })),
    headingError,
  };
}

/** One joint event, drawn after all claims are frozen: any of them fails at the state. */
function countClaims(
  model: ControlAffineModel,
  { condition }: Survey,
  tube: CertifiedTube,
  { wbar }: TubeQuestion,
  random: Random,
): CountedEvidence {
  const alone = aloneIn(Array.from(wbar)).map((bounds) => Float64Array.from(bounds));
  const fails = (at: Float64Array): boolean =>
    !condition.moveTo(at) ||
    condition.rate().rate < tube.claimedRate ||
    alone.some((bounds, c) => condition.sigma(bounds) > tube.pushes[c]!) ||
    condition.authorityDensity(tube.rate) > tube.authorityDensity ||
    tube.spreads.some(({ direction, value }) => spread(condition.W, model.n, model.rotation, direction) > value);
  return countFailures(fails, model.active.length, COUNTED_POINTS, COUNTED_CONFIDENCE, random);
}

export function sumOf(values: readonly number[]): number {
  return values.reduce((sum, value) => sum + value, 0);
}
