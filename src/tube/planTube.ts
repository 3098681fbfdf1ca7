/**
 * The tube along a given plan. The law is the fixed tube's (one contraction rate lambda); what is local is what the cells
 * around the plan show: the disturbance's push sigma, the widths W_ii and the authority.
 *
 * Radius. d is the distance in the metric between the actual state and the planned one, s(t) the push at the actual state:
 *   d' <= -lambda d + s(t)  almost everywhere,  and d rises by `jump` where the planned state jumps by that distance.
 * A channel keeps its sign within a window, so its absolute values have integral T wbar_i at most over any window of length
 * T, wherever in it they fall. With a_i(x) = sqrt(g_i^T M g_i) the push over a window is therefore at most
 *   P(t) = T sum_i max wbar_i a_i over the states touched in (t - T, t]   +   jumps in that time,
 * and nothing of it is taken as decayed. Gronwall's comparison over one window, from its beginning to its end, gives
 *   R(t) = e^{-lambda t} R0 + S(t),   S(t) = e^{-lambda T} S(t - T) + P(t)   (S(t - T) = 0 for t <= T),
 * which for equal cells is tube.ts: S(t) = T sigma (1 - e^{-lambda T ceil(t/T)}) / (1 - e^{-lambda T}). By induction S never
 * exceeds T sigma / (1 - e^{-lambda T}) of the worst cell without jumps. With T = 0 the bound holds at every instant and
 *   S' = -lambda S + sigma, solved step by step with the step's sigma.
 *
 * Touched states. Along a curve of length R in the metric, |dz_i| <= sqrt(W_ii) ds. So every curve of length R from the
 * planned state stays in the box |z_i - z*_i| <= R sqrt(w_i), as long as w_i is at least W_ii all over that box: it cannot
 * reach a face before its length is used up. The box grows from the plan until it contains the box that its own cells ask
 * for; it is then larger than every state that the tube can reach, the shortest paths to them included. R depends on the
 * box and grows with it. Cells are finitely many, so the growth ends.
 *
 * Source: Gronwall's comparison on the Riemannian distance (Manchester and Slotine, IEEE TAC 62(5), 2017, section III); the
 * windows and boxes are this project's own.
 */

/** One step of the plan in which the planned state is continuous; steps follow each other without gap. */
export interface PlanStep {
  /** Whole nanoseconds from the plan's first sample: start < end, the next step starts at `end`. */
  readonly start: number;
  readonly end: number;
  /** Ends of a box around the planned active coordinates during the step, scaled. */
  readonly lower: Float64Array;
  readonly upper: Float64Array;
  /** Planned inputs, held during the step, scaled; m. */
  readonly inputs: Float64Array;
  /** Distance in the metric by which the planned state jumps at `start`. */
  readonly jump: number;
}

/** Upper bounds (rate: lower) over every state of a box, from finitely many cells; they never get better as a box grows. */
export interface LocalBounds {
  /** The pointwise contraction rate, 1/s: shown, not used, as the law's rate is below it wherever `authority` is finite. */
  readonly rate: number;
  /** Parts of the push, 1/s; their worst may come at different times within a window, so each is taken by itself. */
  readonly pushes: readonly number[];
  /** W_ii of each active coordinate. */
  readonly widths: readonly number[];
  /** c^T W c of each direction in which a margin is asked. */
  readonly spreads: readonly number[];
  /** Authority density at the law's rate, 1/s. */
  readonly authority: number;
}

export interface PlanTubeRequest {
  readonly steps: readonly PlanStep[];
  /** The law's contraction rate, 1/s. */
  readonly rate: number;
  /** Window of the disturbance bound, s; 0 for a bound that holds at every instant. */
  readonly window: number;
  /** R0. */
  readonly initialDistance: number;
  /** Null where some state of the box has no proved bounds. */
  readonly local: (lower: Float64Array, upper: Float64Array) => LocalBounds | null;
}

/** What holds throughout one step. */
export interface PlanTubeStep {
  readonly radius: number;
  /** Sum of the pushes over the states that this step touches, 1/s. */
  readonly sigma: number;
  /** Share of the inputs' half-range. */
  readonly authority: number;
  readonly bounds: LocalBounds;
  /** Every state that the tube can touch, active coordinates, scaled. */
  readonly lower: Float64Array;
  readonly upper: Float64Array;
}

/** Why there is no number from a step on: nothing bounds the distance afterwards. */
export interface PlanTubeEnd {
  /** envelope: the tube reaches out of it; cells: it touches states without proved bounds; input: too little is left. */
  readonly kind: "envelope" | "cells" | "input";
  readonly step: number;
  /** Active coordinate (envelope) or input (input) that is short by most; 0 for cells. */
  readonly index: number;
  /** The box of states, and the authority, that were asked for. */
  readonly lower: Float64Array;
  readonly upper: Float64Array;
  readonly authority: number;
}

export interface PlanTube {
  /** From the first step up to the end, or to the whole plan. */
  readonly steps: readonly PlanTubeStep[];
  /** Null: numbers for the whole plan. */
  readonly end: PlanTubeEnd | null;
}

const NANOSECOND = 1e-9;
/** Covers the rounding of the few operations between the cells' bounds and a margin. */
const GROW = 1 + 2 ** -40;

export function planTube({ steps, rate, window, initialDistance, local }: PlanTubeRequest): PlanTube {
  checkRequest(steps, rate, window, initialDistance);
  const done: PlanTubeStep[] = [];
  const push = window > 0 ? windowedPush(steps, rate, window) : instantPush(steps, rate);
  for (const [k, step] of steps.entries()) {
    const decayed = Math.exp(-rate * step.start * NANOSECOND) * initialDistance;
    const radiusWith = (pushes: readonly number[]): number => GROW * (decayed + push.during(k, pushes));
    const found = grownBox(step, radiusWith, local);
    const authority = found.bounds === null ? 0 : (found.radius * found.bounds.authority) / 2;
    const stop = (kind: PlanTubeEnd["kind"], index: number): PlanTube => {
      const { lower, upper } = found;
      return { steps: done, end: { kind, step: k, index, lower, upper, authority } };
    };
    if (found.bounds === null) return found.outside === null ? stop("cells", 0) : stop("envelope", found.outside);
    const short = mostNegative(step.inputs, (v) => 1 - Math.abs(v) - authority);
    if (short !== null) return stop("input", short);
    const { bounds, radius, lower, upper } = found;
    push.keep(k, bounds.pushes);
    done.push({ radius, sigma: sum(bounds.pushes), authority, bounds, lower, upper });
  }
  return { steps: done, end: null };
}

interface Found {
  /** Null: the box has states without bounds; `outside` names the coordinate when it reaches out of [-1, 1]. */
  readonly bounds: LocalBounds | null;
  readonly outside: number | null;
  readonly radius: number;
  readonly lower: Float64Array;
  readonly upper: Float64Array;
}

/** The least box found that contains what its own cells ask for. */
function grownBox(
  step: PlanStep,
  radiusWith: (pushes: readonly number[]) => number,
  local: PlanTubeRequest["local"],
): Found {
  let { lower, upper } = step;
  let radius = 0;
  for (;;) {
    const outside = mostNegative(lower, (low, i) => Math.min(low + 1, 1 - upper[i]!));
    const bounds = outside === null ? local(lower, upper) : null;
    if (bounds === null) return { bounds, outside, radius, lower, upper };
    radius = radiusWith(bounds.pushes);
    const reach = bounds.widths.map((width) => GROW * radius * Math.sqrt(width));
    const low = step.lower.map((value, i) => value - reach[i]!);
    const high = step.upper.map((value, i) => value + reach[i]!);
    if (low.every((value, i) => value >= lower[i]! && high[i]! <= upper[i]!))
      return { bounds, outside, radius, lower, upper };
    const [before, after] = [lower, upper];
    lower = low.map((value, i) => Math.min(value, before[i]!));
    upper = high.map((value, i) => Math.max(value, after[i]!));
  }
}

/** S over the steps; `during` asks what it is when the step has these pushes, `keep` fixes them. */
interface Push {
  during(step: number, pushes: readonly number[]): number;
  keep(step: number, pushes: readonly number[]): void;
}

function windowedPush(steps: readonly PlanStep[], rate: number, window: number): Push {
  const length = Math.round(window / NANOSECOND);
  const decay = Math.exp(-rate * length * NANOSECOND);
  const kept: (readonly number[])[] = [];
  const S: number[] = [];
  // the first steps that reach into the window, and into the time one window before
  let first = 0;
  const during: Push["during"] = (k, pushes) => {
    const { start, end } = steps[k]!;
    while (steps[first]!.end <= start - length) first++;
    const worst = [...pushes];
    let jumps = 0;
    let before = 0;
    for (let j = first; j <= k; j++) {
      const at = steps[j]!;
      if (j < k) for (const [i, value] of kept[j]!.entries()) worst[i] = Math.max(worst[i]!, value);
      if (at.start > start - length) jumps += at.jump;
      if (j < k && at.start < end - length) before = Math.max(before, S[j]!);
    }
    return decay * before + window * sum(worst) + jumps;
  };
  return {
    during,
    keep: (k, pushes) => {
      S[k] = during(k, pushes);
      kept[k] = pushes;
    },
  };
}

function instantPush(steps: readonly PlanStep[], rate: number): Push {
  let reached = 0;
  const ends = (k: number, pushes: readonly number[]): readonly [number, number] => {
    const { start, end, jump } = steps[k]!;
    const decay = -Math.expm1(-rate * (end - start) * NANOSECOND);
    const from = reached + jump;
    return [from, from + decay * (sum(pushes) / rate - from)];
  };
  return {
    during: (k, pushes) => Math.max(...ends(k, pushes)),
    keep: (k, pushes) => {
      reached = ends(k, pushes)[1];
    },
  };
}

/** Index of the most negative room; null when none is negative. */
function mostNegative(values: Float64Array, room: (value: number, index: number) => number): number | null {
  let worst: number | null = null;
  let least = 0;
  for (const [i, value] of values.entries()) {
    const left = room(value, i);
    if (!(left >= least)) {
      worst = i;
      least = left;
    }
  }
  return worst;
}

function sum(values: readonly number[]): number {
  return values.reduce((total, value) => total + value, 0);
}

function checkRequest(steps: readonly PlanStep[], rate: number, window: number, initialDistance: number): void {
  if (!(rate > 0) || !(window >= 0) || !(initialDistance >= 0))
    throw new Error(
      `a tube needs a rate above 0, a window and an initial distance of at least 0; given ${rate}, ${window}, ${initialDistance}`,
    );
  const length = window / NANOSECOND;
  for (const [k, { start, end }] of steps.entries()) {
    if (start !== (k === 0 ? 0 : steps[k - 1]!.end) || !(end > start))
      throw new Error(`step ${k} of the plan runs from ${start} to ${end} ns; steps must follow each other from 0`);
    if (window > 0 && end - start > length)
      throw new Error(`step ${k} lasts ${end - start} ns, longer than the window; cut the plan into shorter steps`);
  }
}
