/**
 * Directed steps in an arithmetic that rounds to nearest. Source: Rump, Zimmermann, Boldo and Melquiond, "Computing
 * predecessor and successor in rounding to nearest", BIT 49, 2009, algorithm 1: with e = fl(phi |x| + eta), phi =
 * u (1 + 2u), fl(x + e) is at least the next float64 above x and at most the one after. ECMA-262 fixes + - * / to round
 * to nearest, ties to even, so the exact result lies within one step of the computed one. Math.sqrt is the processor's
 * IEEE 754 square root in V8, rounded to nearest too (checked against 40 digits); the transcendental functions are not
 * fixed (intervalFunctions.ts).
 */

/** Unit roundoff of float64. */
export const U = 2 ** -53;
/** Least positive float64: covers the absolute error of a gradual underflow. */
export const ETA = 2 ** -1074;
const PHI = U * (1 + 2 * U);

/** A float64 above x, at most two steps away. NaN stays NaN. */
export function stepUp(x: number): number {
  if (x === Number.POSITIVE_INFINITY) return x;
  return x === Number.NEGATIVE_INFINITY ? -Number.MAX_VALUE : x + (PHI * Math.abs(x) + ETA);
}

export function stepDown(x: number): number {
  return -stepUp(-x);
}

/** Upper bound of the real a + b: the computed one where it is exact or too large already (TwoSum: Knuth, TAOCP 2, 4.2.2). */
export function addUp(a: number, b: number): number {
  const sum = a + b;
  const taken = sum - a;
  const missing = a - (sum - taken) + (b - taken);
  return missing <= 0 ? sum : stepUp(sum);
}

export function addDown(a: number, b: number): number {
  return -addUp(-a, -b);
}

/** Upper bound of the real a b; 0 times infinity is 0, as interval ends need it. */
export function multiplyUp(a: number, b: number): number {
  if (a === 0 || b === 0) return 0;
  if (a === 1 || b === 1) return a === 1 ? b : a;
  return stepUp(a * b);
}

export function multiplyDown(a: number, b: number): number {
  return -multiplyUp(-a, b);
}

/** Upper bound of the real a / b, b not 0. */
export function divideUp(a: number, b: number): number {
  if (a === 0) return 0;
  return b === 1 ? a : stepUp(a / b);
}

export function divideDown(a: number, b: number): number {
  return -divideUp(-a, b);
}

/** Upper bound of the real square root; Math.sqrt rounds to nearest. */
export function sqrtUp(a: number): number {
  if (a === 0) return 0;
  const root = Math.sqrt(a);
  // a whole root below 2^26 has an exact square, so the test is exact
  return Number.isInteger(root) && root * root === a && root < 2 ** 26 ? root : stepUp(root);
}

export function sqrtDown(a: number): number {
  if (!(a > 0)) return a === 0 ? 0 : Number.NaN;
  const root = Math.sqrt(a);
  return Number.isInteger(root) && root * root === a && root < 2 ** 26 ? root : Math.max(0, stepDown(root));
}
