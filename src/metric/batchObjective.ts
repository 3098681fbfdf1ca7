/**
 * The learning objective over a batch and its gradient in W and its tangents:
 *
 *   log margin = log Omega(lambda) + log sigma + 1/2 log max c^T W c,   Omega = T / (1 - e^{-lambda T})  (T = 0: 1/lambda)
 *   + kappa (max + mean) of max(0, excess(lambda, rho(x)) / 2 + slack lambda) / lambda_ref
 *
 *   + kappa (max + mean) of max(0, log(R max_i sqrt(W_ii) / room) + slack)         i over the active states
 *
 * rho(x) = 2 limit / (R sqrt(eigmax B^T W^-1 B)), R = Omega sigma, sigma = sum_c max push_c, is the largest gain that the authority limit
 * allows at x: one condition holds rate and authority at once, and it is finite everywhere. The gradient of a maximum
 * over states is that of their power mean of high order, so that every near-worst state pulls.
 */
import type { MetricAdjoint, StateTerms } from "./stateTerms.js";

export interface ObjectiveSettings {
  readonly wbar: Float64Array;
  /** Window of the disturbance bound, s. */
  readonly window: number;
  readonly authorityLimit: number;
  /** Share of an active state's half-range that the tube may take from plans. */
  readonly roomLimit: number;
  readonly activeStates: readonly number[];
  /** Rate that a violation is measured in, 1/s. */
  readonly referenceRate: number;
  /** The vector c of the asked margin at a metric, n: the direction of the worst spread. */
  readonly goalVector: (W: Float64Array) => Float64Array;
}

/** One state of the batch as the objective needs it. */
export interface BatchMember {
  readonly W: Float64Array;
  /** Loads the state's metric into the shared terms. */
  readonly load: () => boolean;
  readonly adjoint: MetricAdjoint;
}

export interface BatchValue {
  readonly objective: number;
  /** d objective / d log lambda. */
  readonly rateSlope: number;
  /** Scaled margin over the batch. */
  readonly margin: number;
  /** Half of the largest excess over the batch, 1/s: how much slower it must go to hold; negative when all hold. */
  readonly shortfall: number;
}

const ORDER = 30;
const SLACK = 0.03;
const HINGE_WEIGHT = 10;

export function batchObjective(
  terms: StateTerms,
  members: readonly BatchMember[],
  lambda: number,
  settings: ObjectiveSettings,
): BatchValue {
  const { wbar, window, authorityLimit, referenceRate, goalVector } = settings;
  const count = members.length;
  const channels = wbar.length;
  const pushes = Array.from({ length: channels }, () => new Float64Array(count));
  const push = new Float64Array(channels);
  const spreads = new Float64Array(count);
  const gains = new Float64Array(count);
  const goals: Float64Array[] = [];
  members.forEach((member, i) => {
    member.load();
    const c = goalVector(member.W);
    goals.push(c);
    spreads[i] = quadratic(member.W, c);
    terms.pushes(wbar, push);
    pushes.forEach((of, c) => {
      of[i] = push[c]!;
    });
    gains[i] = terms.inputGain();
  });
  const hardest = pushes.map(softMaximum);
  const sigma = hardest.reduce((sum, { value }) => sum + value, 0);
  const spread = softMaximum(spreads);
  const omega = window === 0 ? 1 / lambda : -window / Math.expm1(-lambda * window);
  const omegaSlope = window === 0 ? -1 : (lambda * window * Math.exp(-lambda * window)) / Math.expm1(-lambda * window);
  const radius = omega * sigma;

  const hinges = new Float64Array(count);
  let worstExcess = Number.NEGATIVE_INFINITY;
  const rhoOf = (i: number): number => (2 * authorityLimit) / (radius * Math.sqrt(gains[i]!));
  members.forEach((member, i) => {
    member.load();
    const excess = terms.excess(lambda, rhoOf(i));
    worstExcess = Math.max(worstExcess, excess);
    hinges[i] = Math.max(0, (excess / 2 + SLACK * lambda) / referenceRate);
  });
  const hinge = softMaximum(hinges);
  const widest = members.map(({ W }) => widestState(W, settings.activeStates));
  const crowding = Float64Array.from(widest, ({ spread }) =>
    Math.max(0, Math.log((radius * Math.sqrt(spread)) / settings.roomLimit) + SLACK),
  );
  const crowded = softMaximum(crowding);

  let onLogRadius = 1;
  let rateSlope = 0;
  let penalty = HINGE_WEIGHT * (hinge.value + crowded.value);
  members.forEach((member, i) => {
    if (crowding[i]! > 0) {
      const onCrowding = HINGE_WEIGHT * (crowded.weights[i]! + 1 / count);
      const { at, spread: width } = widest[i]!;
      penalty += (HINGE_WEIGHT * crowding[i]!) / count;
      onLogRadius += onCrowding;
      member.adjoint.W[at]! += (0.5 * onCrowding) / width;
    }
    const weight = HINGE_WEIGHT * (hinge.weights[i]! + (hinges[i]! > 0 ? 1 / count : 0));
    penalty += (HINGE_WEIGHT * hinges[i]!) / count;
    if (weight < 1e-9) return;
    member.load();
    const rho = rhoOf(i);
    terms.excess(lambda, rho);
    const onExcess = weight / (2 * referenceRate);
    const slope = terms.addExcessGradient(onExcess, member.adjoint);
    // log rho = const - log R - 1/2 log gain
    const onLogRho = onExcess * slope.rho * rho;
    onLogRadius -= onLogRho;
    terms.inputGain();
    terms.addInputGainGradient((-0.5 * onLogRho) / gains[i]!, member.adjoint);
    rateSlope += onExcess * (slope.lambda + 2 * SLACK) * lambda;
  });
  rateSlope += onLogRadius * omegaSlope;
  members.forEach((member, i) => {
    if (hardest.some(({ weights }) => weights[i]! > 1e-6)) {
      member.load();
      hardest.forEach(({ weights }, c) => {
        push[c] = (onLogRadius * weights[i]!) / sigma;
      });
      terms.addPushGradient(push, wbar, member.adjoint);
    }
    addOuter(member.adjoint.W, goals[i]!, (0.5 * spread.weights[i]!) / spreads[i]!);
  });
  const margin = radius * Math.sqrt(spread.value);
  return { objective: Math.log(margin) + penalty, rateSlope, margin, shortfall: worstExcess / 2 };
}

/** The largest x_i, and its gradient as the power mean's: weights d x_max / d x_i that sum to 1 (to 0 where all are 0). */
function softMaximum(x: Float64Array): { value: number; weights: Float64Array } {
  const top = x.reduce((a, b) => Math.max(a, b), 0);
  const weights = new Float64Array(x.length);
  if (top === 0) return { value: 0, weights };
  let sum = 0;
  for (let i = 0; i < x.length; i++) sum += weights[i] = (x[i]! / top) ** ORDER;
  for (let i = 0; i < x.length; i++) weights[i]! /= sum;
  return { value: top, weights };
}

/** The largest W_ii over the active states and its place in W; 0 where there is none. */
function widestState(W: Float64Array, active: readonly number[]): { spread: number; at: number } {
  const n = Math.sqrt(W.length);
  return active.reduce(
    (widest, i) => (W[i * n + i]! > widest.spread ? { spread: W[i * n + i]!, at: i * n + i } : widest),
    { spread: 0, at: 0 },
  );
}

function quadratic(W: Float64Array, c: Float64Array): number {
  let sum = 0;
  for (let i = 0; i < c.length; i++) for (let j = 0; j < c.length; j++) sum += c[i]! * W[i * c.length + j]! * c[j]!;
  return sum;
}

function addOuter(out: Float64Array, c: Float64Array, weight: number): void {
  for (let i = 0; i < c.length; i++)
    for (let j = 0; j < c.length; j++) out[i * c.length + j]! += weight * c[i]! * c[j]!;
}
