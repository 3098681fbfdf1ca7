/**
 * Second-order expansions of elementary functions with enclosed coefficients (Expansion of taylorModel.ts): the value,
 * slope and half curvature at c, and the range of the third derivative over [c - spread, c + spread], all by intervals,
 * or in closed form for tanh and its slope, where the networks spend their time. Derivatives: Abramowitz and Stegun,
 * "Handbook of Mathematical Functions", 1964, chapters 3 and 4.
 */
import { stepDown, stepUp } from "./directed.js";
import {
  addIntervals,
  divideIntervals,
  ENTIRE,
  type Interval,
  interval,
  multiplyIntervals,
  negateInterval,
  sqrtInterval,
  squareInterval,
  subtractIntervals,
} from "./interval.js";
import {
  around,
  atanInterval,
  cosInterval,
  expInterval,
  logInterval,
  powerInterval,
  sinInterval,
  tanInterval,
} from "./intervalFunctions.js";
import type { Expansion } from "./taylorModel.js";

export type SmoothFunction = (c: number, spread: number, out: Expansion) => void;

export function newExpansion(): Expansion {
  return {
    value: 0,
    slope: 0,
    half: 0,
    third: 0,
    thirdError: 0,
    valueError: 0,
    slopeError: 0,
    halfError: 0,
  };
}

const ONE = interval(1);
const TWO = interval(2);
const HALF = interval(0.5);

const times = multiplyIntervals;
const scaled = (factor: number, a: Interval): Interval => times(interval(factor), a);

/** [value, slope, half the curvature] at the interval c and the third derivative over the interval `all`. */
type Jet = (c: Interval, all: Interval) => readonly [Interval, Interval, Interval, Interval];

function byIntervals(jet: Jet): SmoothFunction {
  return (c, spread, out) => {
    const [value, slope, half, third] = jet(interval(c), around(c, spread));
    out.value = middle(value);
    out.valueError = reach(value, out.value);
    out.slope = middle(slope);
    out.slopeError = reach(slope, out.slope);
    out.half = middle(half);
    out.halfError = reach(half, out.half);
    out.third = middle(third);
    out.thirdError = reach(third, out.third);
  };
}

function middle(a: Interval): number {
  const m = a.lo / 2 + a.hi / 2;
  return Number.isFinite(m) ? m : 0;
}

function reach(a: Interval, from: number): number {
  return Math.max(stepUp(a.hi - from), stepUp(from - a.lo));
}

export const sinExpansion = byIntervals((c, all) => {
  const s = sinInterval(c);
  return [s, cosInterval(c), scaled(-0.5, s), negateInterval(cosInterval(all))];
});

export const cosExpansion = byIntervals((c, all) => {
  const value = cosInterval(c);
  return [value, negateInterval(sinInterval(c)), scaled(-0.5, value), sinInterval(all)];
});

export const expExpansion = byIntervals((c, all) => {
  const value = expInterval(c);
  return [value, value, scaled(0.5, value), expInterval(all)];
});

export const logExpansion = byIntervals((c, all) => {
  // log is not defined where the cell reaches 0: the third derivative over it is then everything
  const inverse = divideIntervals(ONE, c);
  return [
    logInterval(c),
    inverse,
    scaled(-0.5, squareInterval(inverse)),
    all.lo > 0 ? divideIntervals(TWO, powerInterval(all, 3)) : ENTIRE,
  ];
});

/** t' = 1 + t^2, t'' = 2 t (1 + t^2), t''' = 2 (1 + t^2)(1 + 3 t^2). */
export const tanExpansion = byIntervals((c, all) => {
  const t = tanInterval(c);
  const slope = addIntervals(ONE, squareInterval(t));
  const square = squareInterval(tanInterval(all));
  const third = scaled(2, times(addIntervals(ONE, square), addIntervals(ONE, scaled(3, square))));
  return [t, slope, times(t, slope), third];
});

/** d = 1/(1+x^2): d, -x d^2, (6 x^2 - 2) d^3. */
export const atanExpansion = byIntervals((c, all) => {
  const slope = divideIntervals(ONE, addIntervals(ONE, squareInterval(c)));
  const square = squareInterval(all);
  const wide = divideIntervals(ONE, addIntervals(ONE, square));
  const third = times(subtractIntervals(scaled(6, square), TWO), powerInterval(wide, 3));
  return [atanInterval(c), slope, negateInterval(times(c, squareInterval(slope))), third];
});

export const sqrtExpansion = byIntervals((c, all) => {
  const root = sqrtInterval(c);
  const slope = divideIntervals(HALF, root);
  const wide = sqrtInterval(all);
  // -1/8 x^{-3/2} is half the curvature, 3/8 x^{-5/2} the third derivative
  return [
    root,
    slope,
    divideIntervals(scaled(-0.25, slope), c),
    divideIntervals(interval(0.375), times(squareInterval(all), wide)),
  ];
});

export const reciprocalExpansion = byIntervals((c, all) => {
  const inverse = divideIntervals(ONE, c);
  const square = squareInterval(inverse);
  return [
    inverse,
    negateInterval(square),
    times(square, inverse),
    divideIntervals(interval(-6), squareInterval(squareInterval(all))),
  ];
});

/** x^k for a constant k; derivatives by the same interval power. */
export function powerExpansion(k: number): SmoothFunction {
  const falling = (count: number): Interval => {
    let product = ONE;
    for (let i = 0; i < count; i++) product = times(product, subtractIntervals(interval(k), interval(i)));
    return product;
  };
  // k - i is exact for the whole exponents that allow negative bases; else the interval power of a rounded exponent
  // would not be the derivative, so the power is lowered by division
  const lowered = (a: Interval, by: number): Interval =>
    Number.isSafeInteger(k) ? powerInterval(a, k - by) : divideIntervals(powerInterval(a, k), powerInterval(a, by));
  const factors = [1, 2, 3].map(falling);
  const derivative = (a: Interval, by: number): Interval => {
    const factor = factors[by - 1]!;
    return factor.lo === 0 && factor.hi === 0 ? interval(0) : times(factor, lowered(a, by));
  };
  return byIntervals((c, all) => [
    powerInterval(c, k),
    derivative(c, 1),
    scaled(0.5, derivative(c, 2)),
    derivative(all, 3),
  ]);
}

/**
 * |x| on [l, h] with l < 0 < h: between the line alpha x, alpha = (h + l)/(h - l), and 2 h |l| / (h - l) above it.
 * Elsewhere a line.
 */
export const absExpansion: SmoothFunction = (c, spread, out) => {
  const l = stepDown(c - spread);
  const h = stepUp(c + spread);
  flat(out);
  if (l >= 0 || h <= 0) {
    out.value = Math.abs(c);
    out.slope = l >= 0 ? 1 : -1;
    return;
  }
  const alpha = (h + l) / (h - l);
  const gap = (2 * h * -l) / (h - l);
  out.value = alpha * c + gap / 2;
  out.slope = alpha;
  // alpha as computed serves for any alpha near the exact one: the band widens by its error times the reach
  out.valueError = (gap / 2) * (1 + 2 ** -48) + 2 ** -48 * (Math.abs(c) + Math.max(h, -l));
};

/** The slope of |x|: everything in [-1, 1] where the cell holds 0 (the generalised derivative of a kink). */
export const signExpansion: SmoothFunction = (c, spread, out) => {
  flat(out);
  if (stepDown(c - spread) > 0) out.value = 1;
  else if (stepUp(c + spread) < 0) out.value = -1;
  else out.valueError = 1;
};

function flat(out: Expansion): void {
  out.value = out.slope = out.half = out.third = 0;
  out.valueError = out.slopeError = out.halfError = out.thirdError = 0;
}

/**
 * Engine tanh at c is off by at most 2^-49 of itself (intervalFunctions.ts); its argument may be rounded, which costs
 * less: |x| tanh'(x) < 0.45. Everything here is at most 8 in size, so absolute errors of 2^-44 cover what follows.
 */
const TANH_ERROR = 2 ** -48;
const TANH_DERIVED = 2 ** -44;

/** t' = 1 - t^2, t''/2 = -t (1 - t^2), t''' = -2 (1 - q)(1 - 3 q), q = t^2: least -2 at 0, largest 2/3 at q = 2/3. */
export const tanhExpansion: SmoothFunction = (c, spread, out) => {
  const t = Math.tanh(c);
  const slope = (1 - t) * (1 + t);
  out.value = t;
  out.valueError = TANH_ERROR;
  out.slope = slope;
  out.slopeError = TANH_DERIVED;
  out.half = -t * slope;
  out.halfError = TANH_DERIVED;
  const low = Math.max(-1, Math.tanh(c - spread) - TANH_ERROR);
  const high = Math.min(1, Math.tanh(c + spread) + TANH_ERROR);
  const qHigh = Math.max(low * low, high * high);
  const qLow = low <= 0 && high >= 0 ? 0 : Math.min(low * low, high * high);
  const atLow = -2 * (1 - qLow) * (1 - 3 * qLow);
  const atHigh = -2 * (1 - qHigh) * (1 - 3 * qHigh);
  const least = Math.min(atLow, atHigh);
  const most = qLow <= 2 / 3 && qHigh >= 2 / 3 ? 2 / 3 : Math.max(atLow, atHigh);
  thirdRange(out, least, most);
};

/**
 * phi = 1 - t^2: phi' = -2 t phi, phi''/2 = phi (3 q - 1), phi''' = 8 t (1 - q)(2 - 3 q), whose extremes stand at
 * q = (15 +- sqrt 105)/30.
 */
const SLOPE_EXTREMES = [(15 - Math.sqrt(105)) / 30, (15 + Math.sqrt(105)) / 30].map(Math.sqrt);

function slopeThird(t: number): number {
  const q = t * t;
  return 8 * t * (1 - q) * (2 - 3 * q);
}

export const tanhSlopeExpansion: SmoothFunction = (c, spread, out) => {
  const t = Math.tanh(c);
  const phi = (1 - t) * (1 + t);
  out.value = phi;
  out.valueError = TANH_DERIVED;
  out.slope = -2 * t * phi;
  out.slopeError = TANH_DERIVED;
  out.half = phi * (3 * t * t - 1);
  out.halfError = TANH_DERIVED;
  const low = Math.tanh(c - spread) - TANH_ERROR;
  const high = Math.tanh(c + spread) + TANH_ERROR;
  const [a, b] = [slopeThird(low), slopeThird(high)];
  let least = Math.min(a, b);
  let most = Math.max(a, b);
  for (const root of SLOPE_EXTREMES) {
    for (const t of [root, -root]) {
      // an extreme just outside only widens the range
      if (t < low - TANH_DERIVED || t > high + TANH_DERIVED) continue;
      const value = slopeThird(t);
      least = Math.min(least, value);
      most = Math.max(most, value);
    }
  }
  thirdRange(out, least, most);
};

function thirdRange(out: Expansion, least: number, most: number): void {
  out.third = (least + most) / 2;
  out.thirdError = (most - least) / 2 + TANH_DERIVED;
}
