/**
 * Checks a declared symmetry on compiled rates. With T the map on states and R(a) its part on rates (identity but for the
 * position pair, which turns by a):
 *   translation   f, B, G at x + shift equal those at x
 *   rotation      f(T x) = R f(x), B(T x) = R B(x), G(T x) = R G(x): T turns the pair about the origin and adds a to the
 *                 heading; a counter-clockwise (ISO 8855). The last says that the same box of w serves at every heading.
 * The mismatch is relative to the largest entry of that row (the pair counts as one row) over all points.
 */
import type { Random } from "../num/random.js";
import { type CompiledRates, newRatesPoint, type RatesPoint, type StateSpec, type Symmetry } from "./plant.js";

/** Rounding of a handful of float64 operations stays far below; a wrong declaration far above. */
export const SYMMETRY_TOLERANCE = 1e-8;

export interface SymmetryMismatch {
  /** The declaration that was tried: index of the shifted state, or the rotation. */
  readonly of: { readonly kind: "translation"; readonly state: number } | { readonly kind: "rotation" };
  /** Largest relative mismatch found, at least 0; the declaration holds when it is at most SYMMETRY_TOLERANCE. */
  readonly worst: number;
  /** Where: the array, the state whose rate differs, the column of B or G (null for f). */
  readonly array: "f" | "B" | "G";
  readonly rate: number;
  readonly column: number | null;
}

/** One entry a declaration, in the order translations, rotation. m, p: columns of B and G; points: each n, SI. */
export function checkSymmetry(
  rates: CompiledRates,
  states: readonly StateSpec[],
  symmetry: Symmetry,
  m: number,
  p: number,
  points: readonly Float64Array[],
  random: Random,
): SymmetryMismatch[] {
  const { translation, rotation } = symmetry;
  const shiftOf = (state: number): Move => {
    const range = states[state]!.max - states[state]!.min;
    return { of: { kind: "translation", state }, angles: points.map(() => 0), map: shiftMap(state, range, random) };
  };
  const moves = translation.map(shiftOf);
  if (rotation !== null) {
    const angles = points.map(() => Math.PI * (2 * random.uniform() - 1));
    moves.push({ of: { kind: "rotation" }, angles, map: (x, k) => rotated(x, rotation, angles[k]!) });
  }
  return moves.map((move) => worstMismatch(rates, states.length, m, p, points, move, rotation));
}

interface Move {
  readonly of: SymmetryMismatch["of"];
  /** Angle by which the position pair's rates turn, one a point. */
  readonly angles: readonly number[];
  map(x: Float64Array, k: number): Float64Array;
}

function shiftMap(state: number, range: number, random: Random): Move["map"] {
  return (x) => x.map((value, i) => (i === state ? value + range * (2 * random.uniform() - 1) : value));
}

function rotated(
  x: Float64Array,
  { position, heading }: NonNullable<Symmetry["rotation"]>,
  angle: number,
): Float64Array {
  const out = Float64Array.from(x);
  turn(out, position[0], position[1], angle);
  out[heading]! += angle;
  return out;
}

/** (v_a, v_b) turned counter-clockwise in place. */
function turn(v: Float64Array, a: number, b: number, angle: number): void {
  const [x, y] = [v[a]!, v[b]!];
  v[a] = Math.cos(angle) * x - Math.sin(angle) * y;
  v[b] = Math.sin(angle) * x + Math.cos(angle) * y;
}

function worstMismatch(
  rates: CompiledRates,
  n: number,
  m: number,
  p: number,
  points: readonly Float64Array[],
  move: Move,
  rotation: Symmetry["rotation"],
): SymmetryMismatch {
  const difference = newRatesPoint(n, m, p);
  const size = newRatesPoint(n, m, p);
  const moved = newRatesPoint(n, m, p);
  const wanted = newRatesPoint(n, m, p);
  for (const [k, x] of points.entries()) {
    rates.evaluate(x, wanted);
    rates.evaluate(move.map(x, k), moved);
    if (rotation !== null) turnRows(wanted, rotation.position, m, p, move.angles[k]!);
    for (const { array } of arraysOf(m, p)) {
      for (let i = 0; i < wanted[array].length; i++) {
        const gap = Math.abs(moved[array][i]! - wanted[array][i]!);
        // a rate that is not finite at the moved state differs beyond measure
        difference[array][i] = Math.max(difference[array][i]!, Number.isNaN(gap) ? Number.POSITIVE_INFINITY : gap);
        size[array][i] = Math.max(size[array][i]!, Math.abs(wanted[array][i]!), finiteSize(moved[array][i]!));
      }
    }
  }
  let worst: SymmetryMismatch = { of: move.of, worst: 0, array: "f", rate: 0, column: null };
  for (const { array, width } of arraysOf(m, p)) {
    for (let i = 0; i < n * width; i++) {
      const rate = Math.floor(i / width);
      const rows = rotation?.position.includes(rate) ? rotation.position : [rate];
      const rowSize = Math.max(...rows.flatMap((row) => [...size[array].subarray(row * width, (row + 1) * width)]));
      const relative = difference[array][i]! === 0 ? 0 : difference[array][i]! / rowSize;
      if (relative > worst.worst)
        worst = { of: move.of, worst: relative, array, rate, column: array === "f" ? null : i % width };
    }
  }
  return worst;
}

function arraysOf(m: number, p: number): { array: "f" | "B" | "G"; width: number }[] {
  return [
    { array: "f", width: 1 },
    { array: "B", width: m },
    { array: "G", width: p },
  ];
}

function finiteSize(value: number): number {
  return Number.isFinite(value) ? Math.abs(value) : 0;
}

function turnRows(point: RatesPoint, [a, b]: readonly [number, number], m: number, p: number, angle: number): void {
  for (const { array, width } of arraysOf(m, p))
    for (let j = 0; j < width; j++) turn(point[array], a * width + j, b * width + j, angle);
}
