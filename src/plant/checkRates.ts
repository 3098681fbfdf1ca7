/**
 * What the theory asks of compiled rates over the envelope, checked at sample points: all numbers finite, B and G with
 * full column rank. Rank: columns scaled to unit half-ranges, then to length 1; deficient when the least eigenvalue of
 * their Gram matrix is below 1e-12, so when some column lies within 1e-6 (sine of the angle) of the others, or when its
 * length falls below 1e-9 of the longest it has. Between sample points a loss of rank may go unseen; the prover is the one to
 * rule it out.
 */
import { symmetricEigen } from "../num/dense.js";
import { type CompiledRates, newRatesPoint, type RatesPoint, type StateSpec } from "./plant.js";

export type RateFault =
  /** `column`: of B or G (for dBdx of B); 0 for f and dfdx. */
  | {
      readonly kind: "notFinite";
      readonly array: keyof RatesPoint;
      readonly state: number;
      readonly column: number;
      readonly at: Float64Array;
    }
  /** `column` is the one that the others can replace, or that vanishes. */
  | { readonly kind: "rank"; readonly array: "B" | "G"; readonly column: number; readonly at: Float64Array };

/**
 * At most one fault of each array. m, p: columns of B and G; `columns` of B that are judged (a column whose gain is
 * declared unknown is judged on the fitted model instead).
 */
export function checkRates(
  rates: CompiledRates,
  states: readonly StateSpec[],
  m: number,
  p: number,
  columns: readonly number[],
  points: readonly Float64Array[],
): RateFault[] {
  const n = states.length;
  const at = points.map((x) => {
    const out = newRatesPoint(n, m, p);
    rates.evaluate(x, out);
    return out;
  });
  const faults: RateFault[] = [];
  const entry: Record<keyof RatesPoint, (index: number) => { state: number; column: number }> = {
    f: (index) => ({ state: index, column: 0 }),
    B: (index) => ({ state: Math.floor(index / m), column: index % m }),
    G: (index) => ({ state: Math.floor(index / p), column: index % p }),
    dfdx: (index) => ({ state: Math.floor(index / n), column: 0 }),
    dBdx: (index) => ({ state: Math.floor(index / n) % n, column: Math.floor(index / (n * n)) }),
  };
  for (const array of ["f", "B", "G", "dfdx", "dBdx"] as const) {
    // where the values themselves fail, so do their derivatives
    if (array === "dfdx" && faults.length > 0) break;
    for (const [k, out] of at.entries()) {
      const index = out[array].findIndex((value) => !Number.isFinite(value));
      if (index < 0) continue;
      faults.push({ kind: "notFinite", array, ...entry[array](index), at: points[k]! });
      break;
    }
  }
  if (faults.length > 0) return faults;
  const half = states.map(({ min, max }) => (max - min) / 2);
  const all = Array.from({ length: p }, (_, k) => k);
  for (const [array, width, judged] of [
    ["B", m, columns],
    ["G", p, all],
  ] as const) {
    const fault = firstDeficient(
      at.map((out) => out[array]),
      half,
      width,
      judged,
    );
    if (fault !== null) faults.push({ kind: "rank", array, column: fault.column, at: points[fault.point]! });
  }
  return faults;
}

function firstDeficient(
  matrices: readonly Float64Array[],
  half: readonly number[],
  width: number,
  judged: readonly number[],
): { column: number; point: number } | null {
  const c = judged.length;
  const scaled = matrices.map((matrix) => judged.map((j) => half.map((h, i) => matrix[i * width + j]! / h)));
  const longest = judged.map((_, a) => Math.max(...scaled.map((cols) => Math.hypot(...cols[a]!))));
  for (const [point, cols] of scaled.entries()) {
    const lengths = cols.map((column) => Math.hypot(...column));
    const vanished = lengths.findIndex((length, a) => length <= 1e-9 * longest[a]!);
    if (vanished >= 0) return { column: judged[vanished]!, point };
    const gram = new Float64Array(c * c);
    for (let a = 0; a < c; a++) {
      for (let b = 0; b < c; b++) {
        const dot = cols[a]!.reduce((sum, value, i) => sum + value * cols[b]![i]!, 0);
        gram[a * c + b] = dot / (lengths[a]! * lengths[b]!);
      }
    }
    const values = new Float64Array(c);
    const vectors = new Float64Array(c * c);
    symmetricEigen(gram, c, values, vectors);
    const least = values.indexOf(Math.min(...values));
    if (c === 0 || values[least]! > 1e-12) continue;
    const weights = judged.map((_, a) => Math.abs(vectors[a * c + least]!));
    return { column: judged[weights.lastIndexOf(Math.max(...weights))]!, point };
  }
  return null;
}
