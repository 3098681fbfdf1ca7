/**
 * The pointwise rate over the two active coordinates that it varies with most: the worst over a grid of the others.
 * For pictures; it claims nothing.
 */
import { sobolPoints } from "../num/sobol.js";
import type { Condition } from "./condition.js";

export interface RateMap {
  /** Positions in the list of active coordinates. */
  readonly x: number;
  /** Null when there is one active coordinate only. */
  readonly y: number | null;
  /** Scaled grid values. */
  readonly xs: readonly number[];
  readonly ys: readonly number[];
  /** [y][x], 1/s. */
  readonly rate: readonly (readonly number[])[];
}

const GRID = 41;
const OTHERS = 32;
const LINES = 16;

export function rateMap(condition: Condition): RateMap | null {
  const d = condition.model.active.length;
  if (d === 0) return null;
  const at = new Float64Array(d);
  const rateHere = (): number => (condition.moveTo(at) ? condition.rate().rate : Number.NaN);
  const order = byInfluence(d, at, rateHere);
  const x = order[0]!;
  const y = order[1] ?? null;
  const others = order.slice(2);
  const axis = Array.from({ length: GRID }, (_, i) => -1 + (2 * i) / (GRID - 1));
  const fill = others.length === 0 ? new Float64Array(0) : sobolPoints(others.length, OTHERS, 1);
  const worstOverOthers = (): number => {
    if (others.length === 0) return rateHere();
    let worst = Number.POSITIVE_INFINITY;
    for (let i = 0; i < OTHERS; i++) {
      others.forEach((axisIndex, k) => {
        at[axisIndex] = 2 * fill[i * others.length + k]! - 1;
      });
      worst = Math.min(worst, rateHere());
    }
    return worst;
  };
  const row = (): number[] =>
    axis.map((value) => {
      at[x] = value;
      return worstOverOthers();
    });
  const ys = y === null ? [0] : axis;
  const rate = ys.map((value) => {
    if (y !== null) at[y] = value;
    return row();
  });
  return { x, y, xs: axis, ys: y === null ? [] : axis, rate };
}

/** Active coordinates by the mean range of the rate along lines through low-discrepancy states, largest first. */
function byInfluence(d: number, at: Float64Array, rateHere: () => number): number[] {
  const centres = sobolPoints(d, LINES, 1);
  const influence = new Float64Array(d);
  for (let line = 0; line < LINES; line++) {
    for (let axis = 0; axis < d; axis++) {
      for (let k = 0; k < d; k++) at[k] = 2 * centres[line * d + k]! - 1;
      let low = Number.POSITIVE_INFINITY;
      let high = Number.NEGATIVE_INFINITY;
      for (const value of [-1, -0.5, 0, 0.5, 1]) {
        at[axis] = value;
        const rate = rateHere();
        low = Math.min(low, rate);
        high = Math.max(high, rate);
      }
      influence[axis]! += high - low;
    }
  }
  return Array.from({ length: d }, (_, i) => i).sort((a, b) => influence[b]! - influence[a]! || a - b);
}
