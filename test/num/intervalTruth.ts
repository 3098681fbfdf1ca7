import { Decimal } from "decimal.js";
import { ETA } from "../../src/num/directed.js";
import {
  addIntervals,
  divideIntervals,
  type Interval,
  multiplyIntervals,
  sqrtInterval,
  squareInterval,
  subtractIntervals,
} from "../../src/num/interval.js";
import {
  atan2Interval,
  atanInterval,
  cosInterval,
  expInterval,
  logInterval,
  powerInterval,
  sinInterval,
  tanhInterval,
  tanInterval,
} from "../../src/num/intervalFunctions.js";
import type { Random } from "../../src/num/random.js";

// 40 digits and an exponent range beyond float64's; the truth of every check, from the decimal.js package
export const Big = Decimal.clone({ precision: 40, minE: -2000, maxE: 2000, toExpNeg: -3000, toExpPos: 3000 });
/** For + - * /, where digits cancel. */
const Exact = Decimal.clone({ precision: 120, minE: -2000, maxE: 2000, toExpNeg: -3000, toExpPos: 3000 });
export type Big = InstanceType<typeof Big>;

/** The binary value of x to 40 digits: a decimal string, which decimal.js would take, is rounded to 17. */
export function big(x: number, Digits = Big): Big {
  if (!Number.isFinite(x)) return new Digits(x);
  let exponent = 0;
  let mantissa = x;
  while (!Number.isInteger(mantissa)) {
    mantissa *= 2;
    exponent--;
  }
  while (Math.abs(mantissa) >= 2 ** 53) {
    mantissa /= 2;
    exponent++;
  }
  return new Digits(mantissa).times(new Digits(2).pow(exponent));
}

/** sin and cos of decimal.js reduce by a pi of their own precision: angles up to 2^24 keep 30 digits. */
export const FUNCTIONS: readonly {
  readonly name: string;
  readonly enclose: (a: Interval) => Interval;
  readonly truth: (x: Big) => Big;
  readonly float: (x: number) => number;
  readonly from: number;
  readonly to: number;
}[] = [
  { name: "sin", enclose: sinInterval, truth: (x) => Big.sin(x), float: Math.sin, from: -1e3, to: 1e3 },
  { name: "cos", enclose: cosInterval, truth: (x) => Big.cos(x), float: Math.cos, from: -1e3, to: 1e3 },
  { name: "tan", enclose: tanInterval, truth: (x) => Big.tan(x), float: Math.tan, from: -50, to: 50 },
  { name: "atan", enclose: atanInterval, truth: (x) => Big.atan(x), float: Math.atan, from: -1e6, to: 1e6 },
  { name: "tanh", enclose: tanhInterval, truth: (x) => Big.tanh(x), float: Math.tanh, from: -25, to: 25 },
  { name: "exp", enclose: expInterval, truth: (x) => Big.exp(x), float: Math.exp, from: -740, to: 709 },
  { name: "log", enclose: logInterval, truth: (x) => Big.ln(x), float: Math.log, from: ETA, to: 1e300 },
  {
    name: "power 3.5",
    enclose: (a) => powerInterval(a, 3.5),
    truth: (x) => Big.pow(x, 3.5),
    float: (x) => x ** 3.5,
    from: 0,
    to: 1e50,
  },
  {
    name: "power -0.7",
    enclose: (a) => powerInterval(a, -0.7),
    truth: (x) => Big.pow(x, big(-0.7)),
    float: (x) => x ** -0.7,
    from: 1e-200,
    to: 1e200,
  },
  {
    name: "power 7",
    enclose: (a) => powerInterval(a, 7),
    truth: (x) => Big.pow(x, 7),
    float: (x) => x ** 7,
    from: -1e30,
    to: 1e30,
  },
  {
    name: "power -3",
    enclose: (a) => powerInterval(a, -3),
    truth: (x) => Big.pow(x, -3),
    float: (x) => x ** -3,
    from: 1e-60,
    to: 1e60,
  },
  { name: "sqrt", enclose: sqrtInterval, truth: (x) => Big.sqrt(x), float: Math.sqrt, from: 0, to: 1e300 },
  { name: "square", enclose: squareInterval, truth: (x) => x.times(x), float: (x) => x * x, from: -1e100, to: 1e100 },
];

export const BINARY: readonly {
  readonly name: string;
  readonly enclose: (a: Interval, b: Interval) => Interval;
  readonly truth: (x: number, y: number) => Big;
}[] = [
  { name: "add", enclose: addIntervals, truth: (x, y) => big(x, Exact).plus(big(y, Exact)) },
  { name: "subtract", enclose: subtractIntervals, truth: (x, y) => big(x, Exact).minus(big(y, Exact)) },
  { name: "multiply", enclose: multiplyIntervals, truth: (x, y) => big(x, Exact).times(big(y, Exact)) },
  { name: "divide", enclose: divideIntervals, truth: (x, y) => big(x, Exact).div(big(y, Exact)) },
  { name: "atan2", enclose: atan2Interval, truth: (y, x) => Big.atan2(big(y), big(x)) },
];

/** The truth itself carries 40 digits: an end may be beyond it by 1e-36 of it. */
export function holds(a: Interval, truth: Big): boolean {
  const slack = truth.abs().times(1e-36);
  return !(truth.plus(slack).lt(big(a.lo)) || truth.minus(slack).gt(big(a.hi)));
}

/** Arguments that have broken such code before, then random ones: plain, by magnitude, and next to multiples of pi/2. */
export function argument(random: Random, from: number, to: number): number {
  const kind = random.integer(6);
  const inside = (x: number): number => Math.min(to, Math.max(from, x));
  if (kind === 0) return inside(NASTY[random.integer(NASTY.length)]!);
  if (kind === 1) return inside((random.integer(2 ** 10) * Math.PI) / 4 + random.normal() * 2 ** -random.integer(60));
  if (kind === 2) return inside((random.uniform() < 0.5 ? -1 : 1) * Math.exp(40 * random.normal()));
  if (kind === 3) return inside(random.normal());
  if (kind === 4) return inside(1 + random.normal() * 2 ** -random.integer(53));
  return from + random.uniform() * (to - from);
}

const NASTY = [
  0,
  -0,
  1,
  -1,
  0.5,
  2,
  ETA,
  -ETA,
  2 ** -1022,
  2 ** -538,
  1 + 2 ** -52,
  1 - 2 ** -53,
  Math.PI,
  -Math.PI,
  Math.PI / 2,
  3 * Math.PI,
  0.1,
  1 / 3,
  22,
  709.782712893384,
  -708.4,
  -745.1,
  1e16,
  4503599627370497,
  5.5e5,
  // the float64 nearest to a multiple of pi/2 below 2^24, relative (Muller, "Elementary Functions", 2nd ed., 2006, 11.2.2)
  6381956970095103 * 2 ** -32,
];

/** An interval [a, b] and a point within. */
export function thick(random: Random, from: number, to: number): { lo: number; hi: number; inside: number } {
  const a = argument(random, from, to);
  const b = random.uniform() < 0.5 ? argument(random, from, to) : a + Math.abs(a) * 2 ** -random.integer(40);
  const [lo, hi] = [Math.min(a, b), Math.min(to, Math.max(a, b))];
  const inside = Math.min(hi, Math.max(lo, lo + random.uniform() * (hi - lo)));
  return { lo, hi: Math.max(lo, hi), inside };
}
