/**
 * Elementary functions of intervals. ECMA-262 leaves the accuracy of Math's transcendental functions to the engine. V8
 * computes them by ports of FDLIBM (Sun Microsystems, 1993, errors below 1 ulp by its own comments; expm1 and so tanh a
 * little more) and, for sin and cos, of glibc. Measured against
 * 40-digit values on 18,000 arguments of each (test/soak/interval.test.ts): every error below 2 units of 2^-52 of the value.
 * Widening: SLACK = 2^-49 of the value, eight such units, four times what was ever seen, because no proof of the bound is at
 * hand; results near underflow also get an absolute step.
 */
import { ETA, stepDown, stepUp } from "./directed.js";
import {
  contains,
  divideIntervals,
  ENTIRE,
  type Interval,
  interval,
  multiplyIntervals,
  negateInterval,
  squareInterval,
} from "./interval.js";

const SLACK = 2 ** -49;
/** Underflow: below 2^-1000 a relative bound says nothing, 4096 steps of the least float64 do. */
const FLOOR = 4096 * ETA;
/** Largest argument whose quadrant is found by division; beyond it only [-1, 1] is known. */
const LARGEST_ANGLE = 2 ** 24;
/** pi between two neighbouring float64. */
export const PI_INTERVAL: Interval = { lo: Math.PI, hi: stepUp(Math.PI) };

function below(y: number): number {
  return y - (SLACK * Math.abs(y) + FLOOR);
}

function above(y: number): number {
  return y + (SLACK * Math.abs(y) + FLOOR);
}

function increasing(f: (x: number) => number, a: Interval, least: number, most: number): Interval {
  return interval(Math.max(least, below(f(a.lo))), Math.min(most, above(f(a.hi))));
}

export function expInterval(a: Interval): Interval {
  const e = increasing(Math.exp, a, 0, Number.POSITIVE_INFINITY);
  // exp overflows to infinity for large finite arguments: the largest float64 is then still a lower bound
  return { lo: Math.min(e.lo, Number.MAX_VALUE), hi: e.hi };
}

/** ENTIRE when a reaches 0 or below. */
export function logInterval(a: Interval): Interval {
  if (!(a.lo > 0)) return ENTIRE;
  return increasing(Math.log, a, Number.NEGATIVE_INFINITY, Number.POSITIVE_INFINITY);
}

export function tanhInterval(a: Interval): Interval {
  return increasing(Math.tanh, a, -1, 1);
}

export function atanInterval(a: Interval): Interval {
  return increasing(Math.atan, a, -PI_INTERVAL.hi / 2, PI_INTERVAL.hi / 2);
}

/** True when a may hold a point offset + k period, k whole, both in units of pi/2. */
function mayHold(a: Interval, offset: number, period: number): boolean {
  const unit = Math.PI / 2;
  const slack = 2 ** -48 * (2 + Math.max(Math.abs(a.lo), Math.abs(a.hi)));
  const first = Math.ceil((a.lo / unit - offset - slack) / period);
  return first * period <= a.hi / unit - offset + slack;
}

export function sinInterval(a: Interval): Interval {
  return waveInterval(Math.sin, a, 1);
}

export function cosInterval(a: Interval): Interval {
  return waveInterval(Math.cos, a, 0);
}

/** A wave whose maxima stand at (top + 4 k) pi/2. */
function waveInterval(f: (x: number) => number, a: Interval, top: number): Interval {
  if (!(Math.abs(a.lo) <= LARGEST_ANGLE && Math.abs(a.hi) <= LARGEST_ANGLE)) return { lo: -1, hi: 1 };
  if (a.lo === 0 && a.hi === 0) return interval(top === 0 ? 1 : 0);
  const lo = f(a.lo);
  const hi = f(a.hi);
  return interval(
    mayHold(a, top + 2, 4) ? -1 : Math.max(-1, below(Math.min(lo, hi))),
    mayHold(a, top, 4) ? 1 : Math.min(1, above(Math.max(lo, hi))),
  );
}

/** ENTIRE when a may hold a pole. */
export function tanInterval(a: Interval): Interval {
  if (!(Math.abs(a.lo) <= LARGEST_ANGLE && Math.abs(a.hi) <= LARGEST_ANGLE) || mayHold(a, 1, 2)) return ENTIRE;
  const t = increasing(Math.tan, a, Number.NEGATIVE_INFINITY, Number.POSITIVE_INFINITY);
  return a.lo === 0 && a.hi === 0 ? interval(0) : t;
}

/** a ^ exponent. A whole exponent is by squaring and allows negative bases; another one needs a > 0 (a >= 0 when positive). */
export function powerInterval(a: Interval, exponent: number): Interval {
  if (!Number.isFinite(exponent)) return ENTIRE;
  if (Number.isInteger(exponent) && Math.abs(exponent) <= 1024) {
    const whole = wholePower(a, Math.abs(exponent));
    return exponent < 0 ? divideIntervals({ lo: 1, hi: 1 }, whole) : whole;
  }
  if (a.lo < 0 || (exponent < 0 && a.lo === 0)) return ENTIRE;
  const f = (x: number): number => x ** exponent;
  const [lo, hi] = exponent > 0 ? [f(a.lo), f(a.hi)] : [f(a.hi), f(a.lo)];
  return { lo: Math.min(Math.max(0, below(lo)), Number.MAX_VALUE), hi: above(hi) };
}

function wholePower(a: Interval, k: number): Interval {
  if (k === 0) return { lo: 1, hi: 1 };
  if (k === 1) return a;
  if (k % 2 === 0) {
    const square = squareInterval(a);
    return positivePower(square, k / 2);
  }
  // odd: increasing
  const end = (x: number): Interval => {
    const size = positivePower({ lo: Math.abs(x), hi: Math.abs(x) }, k);
    return x < 0 ? negateInterval(size) : size;
  };
  return { lo: end(a.lo).lo, hi: end(a.hi).hi };
}

/** By squaring; a >= 0. */
function positivePower(a: Interval, k: number): Interval {
  if (k === 1) return a;
  const half = positivePower(a, Math.floor(k / 2));
  const even = squareInterval(half);
  return k % 2 === 0 ? even : multiplyIntervals(even, a);
}

/** Angle of (x, y) in [-pi, pi]; all of it where the box holds the origin or crosses the negative x axis. */
export function atan2Interval(y: Interval, x: Interval): Interval {
  const all = { lo: -PI_INTERVAL.hi, hi: PI_INTERVAL.hi };
  if (contains(x, 0) && contains(y, 0)) return all;
  if (x.lo < 0 && contains(y, 0)) return all;
  const corners = [Math.atan2(y.lo, x.lo), Math.atan2(y.lo, x.hi), Math.atan2(y.hi, x.lo), Math.atan2(y.hi, x.hi)];
  // away from the cut and the origin the angle is monotone along each edge, so its extremes stand at corners
  return interval(Math.max(all.lo, below(Math.min(...corners))), Math.min(all.hi, above(Math.max(...corners))));
}

/** The interval within `radius` of x, rounded outwards. */
export function around(x: number, radius: number): Interval {
  return interval(stepDown(x - radius), stepUp(x + radius));
}
