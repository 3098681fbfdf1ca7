/**
 * The learning objective over a batch and its gradient in W and its tangents:
 *
 *   log margin = log T/(1 - e^{-lambda T}) + log max sigma + 1/2 log max c^T W c       (T -> 0: 1/lambda)
 *   + kappa_v mean max(0, 1 + slack - rate / lambda)
 *   + kappa_a max(0, log authority - log limit),    authority = 1/2 R max density(lambda)
 *
 * The gradient of a maximum over states is that of their power mean of high order, so that every near-worst state pulls. A state that fails at
 * lambda has an infinite density: there only the hinge on the rate acts.
 */
import type { MetricAdjoint, StateTerms } from "./stateTerms.js";

export interface ObjectiveSettings {
  readonly wbar: Float64Array;
  /** Window of the disturbance bound, s. */
  readonly window: number;
  readonly authorityLimit: number;
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
  /** Scaled margin and authority over the batch; authority over the states that contract at lambda. */
  readonly margin: number;
  readonly authority: number;
  /** Largest lambda - rate over the batch, 1/s; negative when all contract faster. */
  readonly shortfall: number;
}

const ORDER = 30;
const SLACK = 0.05;
const VIOLATION_WEIGHT = 30;
const AUTHORITY_WEIGHT = 5;

export function batchObjective(
  terms: StateTerms,
  members: readonly BatchMember[],
  lambda: number,
  settings: ObjectiveSettings,
): BatchValue {
  const { wbar, window, authorityLimit, goalVector } = settings;
  const count = members.length;
  const sigmas = new Float64Array(count);
  const spreads = new Float64Array(count);
  const densities = new Float64Array(count);
  const goals: Float64Array[] = [];
  let hinge = 0;
  let hingeSlope = 0;
  let shortfall = Number.NEGATIVE_INFINITY;
  members.forEach((member, i) => {
    member.load();
    const c = goalVector(member.W);
    goals.push(c);
    spreads[i] = quadratic(member.W, c);
    sigmas[i] = terms.sigma(wbar);
    const rate = terms.rate();
    shortfall = Math.max(shortfall, lambda - rate);
    const lacking = 1 + SLACK - rate / lambda;
    if (lacking > 0) {
      hinge += lacking / count;
      hingeSlope += rate / lambda / count;
      terms.addRateGradient(-VIOLATION_WEIGHT / (lambda * count), member.adjoint);
    }
    const density = terms.density(lambda);
    densities[i] = Number.isFinite(density) ? density : 0;
  });

  const sigma = softMaximum(sigmas);
  const spread = softMaximum(spreads);
  const density = softMaximum(densities);
  const windowed = window === 0 ? 1 / lambda : -window / Math.expm1(-lambda * window);
  const windowedSlope =
    window === 0 ? -1 : (-lambda * window * Math.exp(-lambda * window)) / -Math.expm1(-lambda * window);
  const radius = windowed * sigma.value;
  const authority = (radius * density.value) / 2;
  const isOverLimit = authority > authorityLimit;
  const sigmaWeight = 1 + (isOverLimit ? AUTHORITY_WEIGHT : 0);
  let densitySlope = 0;
  members.forEach((member, i) => {
    const hasSigma = sigma.weights[i]! > 1e-6;
    const hasDensity = isOverLimit && density.weights[i]! > 1e-6;
    if (hasSigma || hasDensity) member.load();
    if (hasSigma) terms.addSigmaGradient((sigmaWeight * sigma.weights[i]!) / sigmas[i]!, wbar, member.adjoint);
    addOuter(member.adjoint.W, goals[i]!, (0.5 * spread.weights[i]!) / spreads[i]!);
    if (hasDensity) {
      terms.density(lambda);
      const weight = AUTHORITY_WEIGHT * density.weights[i]!;
      densitySlope += weight * terms.addLogDensityGradient(weight, member.adjoint);
    }
  });
  const margin = radius * Math.sqrt(spread.value);
  const overLimit = isOverLimit ? Math.log(authority / authorityLimit) : 0;
  return {
    objective: Math.log(margin) + VIOLATION_WEIGHT * hinge + AUTHORITY_WEIGHT * overLimit,
    rateSlope: sigmaWeight * windowedSlope + VIOLATION_WEIGHT * hingeSlope + lambda * densitySlope,
    margin,
    authority,
    shortfall,
  };
}

/** The largest x_i, and d log(power mean of x) / d log(x_i): weights that sum to 1. */
function softMaximum(x: Float64Array): { value: number; weights: Float64Array } {
  const top = x.reduce((a, b) => Math.max(a, b), 0);
  const weights = new Float64Array(x.length);
  if (top === 0) return { value: 0, weights };
  let sum = 0;
  for (let i = 0; i < x.length; i++) sum += weights[i] = (x[i]! / top) ** ORDER;
  for (let i = 0; i < x.length; i++) weights[i]! /= sum;
  return { value: top, weights };
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
