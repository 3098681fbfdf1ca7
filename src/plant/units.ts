/**
 * Unit names and their factors to SI. Source: BIPM, "The International System of Units", 9th edition, 2019, tables 2, 4
 * and 8; standard gravity 9.80665 m/s^2: 3rd CGPM (1901). The radian is kept apart from 1, so that an angle is seen
 * to be one.
 */
import type { Unit } from "./plant.js";

export interface KnownUnit extends Unit {
  /** The coherent SI unit of the same quantity: two units convert into each other when it is equal. */
  readonly si: string;
}

const DEGREE = Math.PI / 180;

const UNITS: readonly KnownUnit[] = [
  { name: "1", factor: 1, si: "1" },
  { name: "%", factor: 0.01, si: "1" },
  { name: "m", factor: 1, si: "m" },
  { name: "mm", factor: 1e-3, si: "m" },
  { name: "cm", factor: 1e-2, si: "m" },
  { name: "km", factor: 1e3, si: "m" },
  { name: "s", factor: 1, si: "s" },
  { name: "us", factor: 1e-6, si: "s" },
  { name: "ms", factor: 1e-3, si: "s" },
  { name: "min", factor: 60, si: "s" },
  { name: "h", factor: 3600, si: "s" },
  { name: "rad", factor: 1, si: "rad" },
  { name: "mrad", factor: 1e-3, si: "rad" },
  { name: "deg", factor: DEGREE, si: "rad" },
  { name: "m/s", factor: 1, si: "m/s" },
  { name: "mm/s", factor: 1e-3, si: "m/s" },
  { name: "cm/s", factor: 1e-2, si: "m/s" },
  { name: "km/h", factor: 1 / 3.6, si: "m/s" },
  { name: "rad/s", factor: 1, si: "rad/s" },
  { name: "mrad/s", factor: 1e-3, si: "rad/s" },
  { name: "deg/s", factor: DEGREE, si: "rad/s" },
  { name: "m/s^2", factor: 1, si: "m/s^2" },
  { name: "mm/s^2", factor: 1e-3, si: "m/s^2" },
  { name: "cm/s^2", factor: 1e-2, si: "m/s^2" },
  { name: "g", factor: 9.80665, si: "m/s^2" },
  { name: "rad/s^2", factor: 1, si: "rad/s^2" },
  { name: "deg/s^2", factor: DEGREE, si: "rad/s^2" },
  { name: "m/s^3", factor: 1, si: "m/s^3" },
  { name: "kg", factor: 1, si: "kg" },
  { name: "t", factor: 1e3, si: "kg" },
  { name: "N", factor: 1, si: "N" },
  { name: "kN", factor: 1e3, si: "N" },
  { name: "N/s", factor: 1, si: "N/s" },
  { name: "N m", factor: 1, si: "N m" },
  { name: "kN m", factor: 1e3, si: "N m" },
  { name: "1/s", factor: 1, si: "1/s" },
  { name: "Hz", factor: 1, si: "1/s" },
  { name: "1/m", factor: 1, si: "1/m" },
  { name: "V", factor: 1, si: "V" },
  { name: "A", factor: 1, si: "A" },
  { name: "W", factor: 1, si: "W" },
  { name: "kW", factor: 1e3, si: "W" },
  { name: "Pa", factor: 1, si: "Pa" },
  { name: "bar", factor: 1e5, si: "Pa" },
];

const BY_NAME: ReadonlyMap<string, KnownUnit> = new Map(UNITS.map((unit) => [unit.name, unit]));

/** Null when the table has no such unit. */
export function unitNamed(name: string): KnownUnit | null {
  return BY_NAME.get(name) ?? null;
}

export function unitNames(): string[] {
  return UNITS.map((unit) => unit.name);
}

/** Units that convert into the given one, for messages. */
export function unitsLike(unit: KnownUnit): string[] {
  return UNITS.filter((other) => other.si === unit.si).map((other) => other.name);
}

/** True for units of plane angle. */
export function isAngleUnit(unit: Unit): boolean {
  return unitNamed(unit.name)?.si === "rad";
}
