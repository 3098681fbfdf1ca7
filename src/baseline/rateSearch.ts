/**
 * The rate of the best constant metric on given samples: margin and authority at one rate are convex programs
 * (goalProgram.ts), the rate itself is searched. Rates fall geometrically from the fastest that contracts, so that a
 * solution is a strictly feasible start for the next; then the best is refined between its neighbours.
 */

import { type ConstantProblem, type GainedMetric, measure, steadyFactor } from "./constantProblem.js";
import { type Contraction, contraction, gainFor } from "./contraction.js";
import { type GoalPoint, goalPrograms } from "./goalProgram.js";

export interface RateRequest {
  readonly window: number;
  readonly authorityLimit: number;
  /** Largest R sqrt(c^T W c) over the problem's rooms. */
  readonly roomLimit: number;
  /** A given rate, 1/s; null: searched. */
  readonly rate: number | null;
  /** A rate near which the best is expected; null: none. */
  readonly near: number | null;
}

export interface Attempt extends GainedMetric {
  readonly rate: number;
  readonly margin: number;
  readonly authority: number;
  /** False when no metric at this rate meets the authority limit: W is then the one of least authority. */
  readonly isWithinLimit: boolean;
  /** Largest R sqrt(c^T W c) over the rooms; above the limit when no metric at this rate meets it: W then leaves most room. */
  readonly room: number;
  /** Relative distance of margin (or authority) to the least at this rate; null when not proved. */
  readonly gap: number | null;
}

export interface RateSearch {
  /** Least margin within the limit; else the least authority; null when nothing contracts. */
  readonly best: Attempt | null;
  /** Fastest rate at which any constant metric contracts on the samples, 1/s, to 3 %; 0 when none was found. */
  readonly fastest: number;
  readonly slowest: number;
}

/** The condition is asked this much faster than claimed, so that it holds strictly between the samples. */
export const RATE_SLACK = 0.01;
/** The authority is asked this much below its limit. */
export const AUTHORITY_SLACK = 0.01;
/** A start is inside the room by this share. */
const ROOM_SLACK = 0.98;
const STEP = 0.6;
const MOST_STEPS = 16;
const REFINEMENTS = 2;

const strict = (rate: number): number => rate * (1 + RATE_SLACK);

export function searchRate(problem: ConstantProblem, request: RateRequest): RateSearch {
  const possible = contraction(problem);
  if (request.rate !== null) {
    const W = possible.at(strict(request.rate));
    const fastest = W === null ? (possible.fastest()?.rate ?? 0) : possible.rateOf(W);
    const best =
      W === null ? null : attemptAt(problem, request, request.rate, { W, rho: gain(problem, W, strict(request.rate)) });
    return { best, fastest, slowest: possible.slowest };
  }
  const fastest = possible.fastest();
  if (fastest === null) return { best: null, fastest: 0, slowest: possible.slowest };
  const attempts: Attempt[] = [];
  const attempt = (rate: number): Attempt | null => {
    const made = attemptAt(problem, request, rate, startAt(problem, possible, fastest, attempts, rate));
    if (made !== null) attempts.push(made);
    return made;
  };
  descend(attempt, request, fastest.rate);
  for (let i = 0; i < REFINEMENTS && attempts.length > 0; i++) {
    const sorted = [...attempts].sort((a, b) => a.rate - b.rate);
    const at = sorted.indexOf(bestOf(sorted, request.roomLimit));
    const neighbours = [sorted[at + 1], sorted[at - 1]].filter((other) => other !== undefined);
    for (const other of neighbours) attempt(Math.sqrt(sorted[at]!.rate * other.rate));
  }
  return {
    best: attempts.length === 0 ? null : bestOf(attempts, request.roomLimit),
    fastest: fastest.rate,
    slowest: possible.slowest,
  };
}

/** Geometric steps downwards, until three in a row are worse than the best. */
function descend(attempt: (rate: number) => Attempt | null, { near, roomLimit }: RateRequest, fastest: number): void {
  const top = (0.97 * fastest) / (1 + RATE_SLACK);
  const first = near === null ? top : Math.min(top, near / STEP);
  const made: Attempt[] = [];
  let worse = 0;
  for (let i = 0; i < MOST_STEPS && worse < (near === null ? 3 : 2); i++) {
    const next = attempt(first * STEP ** i);
    if (next === null) continue;
    made.push(next);
    worse = bestOf(made, roomLimit) === next ? 0 : worse + 1;
  }
}

/** Any W that contracts at a faster rate contracts strictly at this one: the nearest such. */
function startAt(
  problem: ConstantProblem,
  possible: Contraction,
  fastest: { readonly rate: number; readonly W: Float64Array },
  attempts: readonly Attempt[],
  rate: number,
): GainedMetric {
  const faster = attempts.filter((other) => other.rate > rate);
  if (faster.length > 0) return faster.reduce((a, b) => (b.rate < a.rate ? b : a));
  const W = possible.at(strict(rate)) ?? fastest.W;
  return { W, rho: gain(problem, W, strict(rate)) };
}

/** A strictly sufficient gain. */
function gain(problem: ConstantProblem, W: Float64Array, rate: number): number {
  return 1.5 * gainFor(problem, W, rate) + 1e-3 * rate * Math.hypot(...W);
}

function attemptAt(
  problem: ConstantProblem,
  { window, authorityLimit, roomLimit }: RateRequest,
  rate: number,
  start: GainedMetric,
): Attempt | null {
  const omega = steadyFactor(rate, window);
  const limit = ((1 - AUTHORITY_SLACK) * 2 * authorityLimit) / omega;
  const programs = goalPrograms(problem, strict(rate));
  const inside = programs.leastAuthority(programs.start(start), 0.9 * limit);
  if (inside === null) return null;
  const made = ({ W, rho, gap }: GoalPoint, isWithinLimit: boolean): Attempt => {
    const { s, e, w, v } = measure(problem, W);
    const [margin, room] = [omega * s * Math.sqrt(w), omega * s * Math.sqrt(v)];
    return { W, rho, rate, margin, authority: (omega * s * rho * Math.sqrt(e)) / 2, isWithinLimit, room, gap };
  };
  const isRoomy = ({ W }: GoalPoint): boolean => {
    const { s, v } = measure(problem, W);
    return omega * s * Math.sqrt(v) < ROOM_SLACK * roomLimit;
  };
  const roomy = isRoomy(inside) ? inside : programs.leastRoom(inside, limit);
  if (roomy === null) return made(inside, false);
  if (!isRoomy(roomy)) return made(roomy, true);
  const best = programs.leastMargin(roomy, limit, roomLimit / omega);
  return best === null ? made(inside, false) : made(best, true);
}

function bestOf(attempts: readonly Attempt[], roomLimit: number): Attempt {
  const within = attempts.filter((attempt) => attempt.isWithinLimit);
  const roomy = within.filter(({ room }) => room <= roomLimit);
  if (roomy.length > 0) return roomy.reduce((a, b) => (b.margin < a.margin ? b : a));
  if (within.length > 0) return within.reduce((a, b) => (b.room < a.room ? b : a));
  return attempts.reduce((a, b) => (b.authority < a.authority ? b : a));
}
