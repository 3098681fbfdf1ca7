/**
 * The best constant dual metric W (the body frame's where a rotation is declared) for a margin under an authority limit,
 * over the whole envelope. At a rate lambda, Omega the window's steady factor:
 *   minimise   Omega sigma(W) sqrt(c^T W c),             sigma = max over the states of sum_i wbar_i sqrt(g_i^T W^-1 g_i)
 *   subject to F - rho B B^T <= 0  at every state and input corner
 *              1/2 Omega sigma rho sqrt(eigmax B^T W^-1 B) <= limit
 *              Omega sigma sqrt(W_ii) <= room limit for the states that plans need room in
 * On sampled states this is convex for a fixed lambda (goalProgram.ts) and lambda is searched (rateSearch.ts). The
 * samples ask for lambda (1 + 1 %) and for 1 % less than the authority limit; where a checker still finds states that
 * fail, they join the samples and the whole is solved again (cuts). One rho serves all states; a checker that takes the
 * least at each state finds less authority.
 */
import type { ControlAffineModel } from "../model/controlAffine.js";
import { conditionSample } from "./conditionSample.js";
import { precondition } from "./precondition.js";
import { type Attempt, searchRate } from "./rateSearch.js";

export interface ConstantMetricRequest {
  /** Bound of each leftover channel, SI. */
  readonly wbar: Float64Array;
  /** Leftover window T, s; 0 for a bound at every instant. */
  readonly window: number;
  /** Share of each input's half-range. */
  readonly authorityLimit: number;
  /** One state, or the position pair for a planar margin (their block's largest eigenvalue). */
  readonly goalStates: readonly number[];
  /** Share of the half-range of each of `roomStates` that the margins may take from plans. */
  readonly roomLimit: number;
  readonly roomStates: readonly number[];
  /** A given rate, 1/s; null: searched. */
  readonly rate: number | null;
  /** Times that cuts may be added. */
  readonly rounds: number;
}

export interface ConstantMetric {
  /** n x n, scaled states; W_goal at most 1. */
  readonly W: Float64Array;
  readonly rho: number;
  /** 1/s. */
  readonly rate: number;
  /** Scaled margin and authority on the samples. */
  readonly margin: number;
  readonly authority: number;
  /** Relative distance of the margin to the least at this rate on the samples; null when it was not proved. */
  readonly gap: number | null;
}

export type ConstantMetricResult = { readonly samples: number; readonly cutRounds: number } & (
  | ({ readonly status: "found" } & ConstantMetric)
  /** The checker still finds states that fail after the last round. */
  | ({ readonly status: "violated"; readonly violations: readonly Float64Array[] } & ConstantMetric)
  | {
      readonly status: "infeasible";
      readonly reason: string;
      /** Fastest rate of any constant metric on the samples, whatever the authority, 1/s; 0: none found. */
      readonly fastestRate: number;
      /** Of the metrics that contract, the one of least authority; null when none contracts. */
      readonly leastAuthority: ConstantMetric | null;
    }
);

/**
 * corners: the input corners, each m. states: active coordinates to start from (points and corners of the box, 16 to 40).
 * findViolations: active coordinates of states where W fails at `rate`, worst first; empty when none is found.
 */
export function constantMetric(
  model: ControlAffineModel,
  corners: readonly Float64Array[],
  states: readonly Float64Array[],
  request: ConstantMetricRequest,
  findViolations: (metric: ConstantMetric) => readonly Float64Array[],
): ConstantMetricResult {
  const { n, m, p } = model;
  checkRequest(request, n, p, states.length);
  const { wbar, goalStates } = request;
  const goal = new Float64Array(n * goalStates.length);
  goalStates.forEach((state, column) => {
    goal[state * goalStates.length + column] = 1;
  });
  const rooms = request.roomStates.map((state) => Float64Array.from({ length: n }, (_, i) => (i === state ? 1 : 0)));
  const samples = states.map((at) => conditionSample(model, corners, at));
  let near: number | null = null;
  for (let round = 0; ; round++) {
    const { problem, original } = precondition({ n, m, wbar, goal, rooms, samples });
    const { best, fastest, slowest } = searchRate(problem, { ...request, near });
    const made = { samples: samples.length, cutRounds: round };
    if (best !== null && !best.isWithinLimit && round < request.rounds) {
      // what needs least authority on the samples must contract between them before it is called the least
      const violations = findViolations(metricOf(best, original));
      if (violations.length > 0) {
        samples.push(...violations.map((at) => conditionSample(model, corners, at)));
        near = best.rate;
        continue;
      }
    }
    if (best === null || !best.isWithinLimit) {
      const reason = best === null ? noRate(request, fastest, slowest) : tooMuchAuthority(request, best);
      const leastAuthority = best === null ? null : metricOf(best, original);
      return { ...made, status: "infeasible", reason, fastestRate: fastest, leastAuthority };
    }
    const metric = metricOf(best, original);
    const violations = findViolations(metric);
    if (violations.length === 0) return { ...made, status: "found", ...metric };
    if (round === request.rounds) return { ...made, status: "violated", violations, ...metric };
    samples.push(...violations.map((at) => conditionSample(model, corners, at)));
    near = best.rate;
  }
}

function metricOf({ W, ...rest }: Attempt, original: (W: Float64Array) => Float64Array): ConstantMetric {
  const { rho, rate, margin, authority, gap } = rest;
  return { W: original(W), rho, rate, margin, authority, gap };
}

function noRate({ rate }: ConstantMetricRequest, fastest: number, slowest: number): string {
  if (fastest === 0)
    return `no constant metric contracts over the whole envelope, even at ${slowest.toPrecision(2)} 1/s`;
  return `no constant metric contracts over the whole envelope at ${rate} 1/s; the fastest rate found is ${fastest.toPrecision(3)} 1/s`;
}

function tooMuchAuthority({ authorityLimit }: ConstantMetricRequest, { authority, rate }: Attempt): string {
  const percent = (share: number): string => `${(100 * share).toPrecision(3)} %`;
  return `constant metrics contract, but the least authority found is ${percent(authority)} of the half-range (at ${rate.toPrecision(3)} 1/s), over the limit of ${percent(authorityLimit)}`;
}

function checkRequest(request: ConstantMetricRequest, n: number, p: number, states: number): void {
  const { wbar, window, authorityLimit, goalStates, rate } = request;
  const refuse = (given: string, allowed: string): never => {
    throw new Error(`constant metric: given ${given}; ${allowed}`);
  };
  if (states === 0) refuse("no state", "give at least one state of the envelope");
  if (wbar.length !== p || !wbar.some((bound) => bound > 0) || !wbar.every((bound) => bound >= 0)) {
    refuse(`disturbance bounds [${wbar.join(", ")}]`, `give ${p} bounds, none negative and not all zero`);
  }
  if (!(window >= 0)) refuse(`window ${window} s`, "give 0 or more");
  if (!(authorityLimit > 0)) refuse(`authority limit ${authorityLimit}`, "give a share of the half-range above 0");
  if (rate !== null && !(rate > 0)) refuse(`rate ${rate} 1/s`, "give a rate above 0, or null to have it searched");
  if (goalStates.length === 0 || !goalStates.every((state) => Number.isInteger(state) && state >= 0 && state < n)) {
    refuse(`goal states [${goalStates.join(", ")}]`, `give one or more indices from 0 to ${n - 1}`);
  }
}
