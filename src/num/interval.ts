/**
 * Closed intervals of reals with outward-rounded arithmetic. Source: Moore, Kearfott and Cloud, "Introduction to Interval
 * Analysis", SIAM, 2009, chapters 2 and 4. Every function returns an interval that holds the real result for all reals of
 * its arguments; where it is not defined for some of them, or nothing is known, the result is ENTIRE, which no proof can
 * pass. Invariant: lo <= hi, neither is NaN; kept by `interval` and all operations.
 */
import { addDown, addUp, divideDown, divideUp, multiplyDown, multiplyUp, sqrtDown, sqrtUp } from "./directed.js";

export interface Interval {
  readonly lo: number;
  readonly hi: number;
}

export const ENTIRE: Interval = { lo: Number.NEGATIVE_INFINITY, hi: Number.POSITIVE_INFINITY };

/** [lo, hi]; ENTIRE when an end is NaN. Throws when the ends are swapped. */
export function interval(lo: number, hi: number = lo): Interval {
  if (Number.isNaN(lo) || Number.isNaN(hi)) return ENTIRE;
  if (lo > hi) throw new Error(`an interval from ${lo} to ${hi}: the lower end must not be above the upper one`);
  return { lo, hi };
}

export function contains(a: Interval, x: number): boolean {
  return a.lo <= x && x <= a.hi;
}

export function negateInterval(a: Interval): Interval {
  return { lo: -a.hi, hi: -a.lo };
}

export function addIntervals(a: Interval, b: Interval): Interval {
  return interval(addDown(a.lo, b.lo), addUp(a.hi, b.hi));
}

export function subtractIntervals(a: Interval, b: Interval): Interval {
  return interval(addDown(a.lo, -b.hi), addUp(a.hi, -b.lo));
}

export function multiplyIntervals(a: Interval, b: Interval): Interval {
  return interval(
    Math.min(multiplyDown(a.lo, b.lo), multiplyDown(a.lo, b.hi), multiplyDown(a.hi, b.lo), multiplyDown(a.hi, b.hi)),
    Math.max(multiplyUp(a.lo, b.lo), multiplyUp(a.lo, b.hi), multiplyUp(a.hi, b.lo), multiplyUp(a.hi, b.hi)),
  );
}

/** ENTIRE when b holds 0. */
export function divideIntervals(a: Interval, b: Interval): Interval {
  if (contains(b, 0)) return ENTIRE;
  return interval(
    Math.min(divideDown(a.lo, b.lo), divideDown(a.lo, b.hi), divideDown(a.hi, b.lo), divideDown(a.hi, b.hi)),
    Math.max(divideUp(a.lo, b.lo), divideUp(a.lo, b.hi), divideUp(a.hi, b.lo), divideUp(a.hi, b.hi)),
  );
}

export function squareInterval(a: Interval): Interval {
  const near = contains(a, 0) ? 0 : Math.min(Math.abs(a.lo), Math.abs(a.hi));
  const far = Math.max(Math.abs(a.lo), Math.abs(a.hi));
  return interval(Math.max(0, multiplyDown(near, near)), multiplyUp(far, far));
}

/** ENTIRE when a reaches below 0. */
export function sqrtInterval(a: Interval): Interval {
  return a.lo < 0 ? ENTIRE : interval(sqrtDown(a.lo), sqrtUp(a.hi));
}

export function absInterval(a: Interval): Interval {
  const far = Math.max(Math.abs(a.lo), Math.abs(a.hi));
  return { lo: contains(a, 0) ? 0 : Math.min(Math.abs(a.lo), Math.abs(a.hi)), hi: far };
}

/** -1, 0 or 1 at each real; an interval with 0 inside gives [-1, 1], the generalised slope of |x| there. */
export function signInterval(a: Interval): Interval {
  if (a.lo > 0) return { lo: 1, hi: 1 };
  return a.hi < 0 ? { lo: -1, hi: -1 } : { lo: -1, hi: 1 };
}

export function hull(a: Interval, b: Interval): Interval {
  return { lo: Math.min(a.lo, b.lo), hi: Math.max(a.hi, b.hi) };
}
