/**
 * One certificate from a metric: survey it, choose the tube's rate, refine the suprema there, count once, and say what
 * it is worth. Verifier and tube meet here only.
 */
import type { ControlAffineModel } from "../model/controlAffine.js";
import { type DualMetricFile, dualMetric } from "../nets/dualMetric.js";
import type { Random } from "../num/random.js";
import type { MarginGoal } from "../plant/plant.js";
import { type CertificateExtremes, chooseRate, type RateChoice, type TradeOffPoint } from "../tube/chooseRate.js";
import { tubeRadius } from "../tube/tube.js";
import { type CountedEvidence, countFailures } from "../verify/counted.js";
import { type MarginDirection, spread } from "../verify/spread.js";
import { type Survey, survey } from "../verify/survey.js";

export interface CertifyRequest {
  /** Bound of each leftover channel, SI. */
  readonly wbar: Float64Array;
  readonly window: number;
  readonly goal: MarginGoal;
  readonly authorityLimit: number;
  readonly initialDistance: number;
  readonly rate: number | null;
  readonly random: Random;
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
  readonly sigma: number;
  readonly authority: number;
  readonly authorityDensity: number;
  /** sup of c^T W c by direction name: the states by index, planar, along, across. */
  readonly spreads: readonly { readonly direction: MarginDirection; readonly value: number }[];
  readonly headingError: number;
}

const SURVEY = { points: 4096, starts: 8 };
/** A sampled supremum may miss the true one by a little: every one enters the tube this much worse. */
export const SAMPLED_ALLOWANCE = 0.01;
const COUNTED_POINTS = 20_000;
const COUNTED_CONFIDENCE = 0.999;

export function certifyMetric(model: ControlAffineModel, file: DualMetricFile, request: CertifyRequest): Certification {
  const seen = survey(model, dualMetric(file), SURVEY);
  const extremes = sampledExtremes(model, seen, request);
  const choice = chooseRate(extremes, request);
  if (choice.status !== "chosen") return { survey: seen, choice, tube: null, counted: null };
  const tube = tubeAt(model, seen, extremes, choice.point, request);
  const counted = countClaims(model, seen, extremes.usableRate, tube, request);
  return { survey: seen, choice, tube, counted };
}

function sampledExtremes(model: ControlAffineModel, seen: Survey, request: CertifyRequest): CertificateExtremes {
  const worse = (value: number): number => value * (1 + SAMPLED_ALLOWANCE);
  const known = new Map<string, number>();
  const spreadOf = (direction: MarginDirection): number => {
    const key = JSON.stringify(direction);
    const value = known.get(key) ?? worse(seen.spread(direction).value);
    known.set(key, value);
    return value;
  };
  return {
    usableRate: seen.worst.rate * (1 - SAMPLED_ALLOWANCE),
    sigma: worse(seen.sigma(request.wbar).value),
    authorityDensity: (rate) => worse(seen.authorityDensity(rate).value),
    goalSpread: (radius) => spreadOf(goalDirection(request.goal, headingErrorOf(model, radius, spreadOf))),
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

function goalDirection(goal: MarginGoal, headingError: number): MarginDirection {
  if (goal.kind === "state" || goal.kind === "planar") return goal as MarginDirection;
  return { kind: goal.kind, headingError };
}

function tubeAt(
  model: ControlAffineModel,
  seen: Survey,
  extremes: CertificateExtremes,
  point: TradeOffPoint,
  request: CertifyRequest,
): CertifiedTube {
  const worse = (value: number): number => value * (1 + SAMPLED_ALLOWANCE);
  const radius = tubeRadius({ window: request.window, sigma: extremes.sigma }, point.rate, request.initialDistance);
  const spreadOf = (direction: MarginDirection): number => worse(seen.spread(direction).value);
  const headingError = headingErrorOf(model, radius, spreadOf);
  const states: MarginDirection[] = Array.from({ length: model.n }, (_, state) => ({ kind: "state", state }));
  const planar: MarginDirection[] =
    model.rotation === null
      ? []
      : [{ kind: "planar" }, { kind: "along", headingError }, { kind: "across", headingError }];
  const authorityDensity = extremes.authorityDensity(point.rate);
  return {
    rate: point.rate,
    radius,
    sigma: extremes.sigma,
    authority: (radius * authorityDensity) / 2,
    authorityDensity,
    spreads: [...states, ...planar].map((direction) => ({ direction, value: spreadOf(direction) })),
    headingError,
  };
}

/** One joint event, drawn after all claims are frozen: any of them fails at the state. */
function countClaims(
  model: ControlAffineModel,
  seen: Survey,
  claimedRate: number,
  tube: CertifiedTube,
  request: CertifyRequest,
): CountedEvidence {
  const { condition } = seen;
  const fails = (at: Float64Array): boolean =>
    !condition.moveTo(at) ||
    condition.rate().rate < claimedRate ||
    condition.sigma(request.wbar) > tube.sigma ||
    condition.authorityDensity(tube.rate) > tube.authorityDensity ||
    tube.spreads.some(({ direction, value }) => spread(condition.W, model.n, model.rotation, direction) > value);
  return countFailures(fails, model.active.length, COUNTED_POINTS, COUNTED_CONFIDENCE, request.random);
}
