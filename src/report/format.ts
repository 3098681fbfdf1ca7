/**
 * Numbers as people read them: three significant digits with their unit. A number that something is built on is never
 * rounded to its better side: margins, authority, bounds and upper limits go up, rates and proved shares go down.
 */
export type Rounding = "near" | "up" | "down";

const DIGITS = 3;
/** Relative distance within which a value counts as already rounded, so that 0.33 does not become 0.331. */
const ALREADY_ROUND = 1e-12;

export function number(value: number, rounding: Rounding = "near", digits = DIGITS): string {
  if (Number.isNaN(value)) return "not a number";
  if (!Number.isFinite(value)) return value > 0 ? "unlimited" : "minus unlimited";
  if (value === 0) return "0";
  return plain(rounded(value, rounding, digits), digits);
}

function rounded(value: number, rounding: Rounding, digits: number): number {
  const nearest = Number(value.toPrecision(digits));
  if (rounding === "near" || Math.abs(nearest - value) <= ALREADY_ROUND * Math.abs(value)) return nearest;
  const isBeyond = rounding === "up" ? nearest > value : nearest < value;
  if (isBeyond) return nearest;
  const step = 10 ** (Math.floor(Math.log10(Math.abs(value))) - digits + 1);
  return Number((nearest + (rounding === "up" ? step : -step)).toPrecision(digits));
}

function plain(value: number, digits: number): string {
  const size = Math.abs(value);
  if (size !== 0 && (size < 1e-4 || size >= 1e6)) {
    const [mantissa, exponent] = value.toExponential(digits - 1).split("e");
    return `${Number(mantissa)}e${Number(exponent)}`;
  }
  return String(Number(value.toPrecision(Math.max(digits, Math.ceil(Math.log10(size + 1))))));
}

/** Value and unit; the unit 1 is not written. */
export function quantity(value: number, unit: string, rounding: Rounding = "near"): string {
  return unit === "1" || unit === "" ? number(value, rounding) : `${number(value, rounding)} ${unit}`;
}

/** A share between 0 and 1 as per cent. Rounding to the nearest never turns less than all into 100 %. */
export function share(value: number, rounding: Rounding = "near"): string {
  const hidesRemainder = rounding === "near" && value < 1 && Number((100 * value).toPrecision(DIGITS)) === 100;
  return `${number(100 * value, hidesRemainder ? "down" : rounding)} %`;
}

export function duration(seconds: number): string {
  if (seconds < 100) return `${number(seconds)} s`;
  const whole = Math.round(seconds);
  return `${Math.floor(whole / 60)} min ${whole % 60} s`;
}

export function range([low, high]: readonly [number, number], unit: string, rounding: readonly [Rounding, Rounding]) {
  const text = `${number(low, rounding[0])} to ${number(high, rounding[1])}`;
  return unit === "1" ? text : `${text} ${unit}`;
}

/** Smallest of 1, 2, 5 times a power of ten that is at least the value (> 0). */
export function niceStep(value: number): number {
  const power = 10 ** Math.floor(Math.log10(value));
  const step = [1, 2, 5, 10].find((factor) => factor * power >= value * (1 - ALREADY_ROUND))!;
  return Number((step * power).toPrecision(1));
}

export function plural(count: number, noun: string): string {
  return `${count} ${noun}${count === 1 ? "" : "s"}`;
}
