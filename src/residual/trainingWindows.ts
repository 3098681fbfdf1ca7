/**
 * The fit as a linear reading of the networks over windows. With t_j(x) the unknown terms and h_k the step lengths,
 *   (x(t+T) - x(t)) / T - (1/T) sum_k h_k [prior, trapezoid in x, input held] = sum_j sum_k q_jk t_j(x_k)
 * q_jk are the trapezoid's weights, times the held inputs for a gain. One window has its target per unknown rate and,
 * per term, the features at its samples and their weights. SI.
 */
import type { Run } from "../logs/recording.js";
import { type Feature, featureValue } from "../nets/features.js";
import type { Random } from "../num/random.js";
import { newRatesPoint, type Plant } from "../plant/plant.js";
import type { Scaling } from "../plant/scaling.js";

const CELLS = 5;

/** One piece, prepared once: windows are cut from it by start index. */
export interface PreparedPiece {
  readonly count: number;
  /** Step lengths, N - 1. */
  readonly steps: Float64Array;
  /** Cell of each sample on a coarse grid over the states that the unknown terms depend on. */
  readonly cells: Int32Array;
  /** Running sum of (dx - prior step integral) per unknown rate: N x rates, SI. */
  readonly unexplained: Float64Array;
  /** Per term: features N x F, and the input it is multiplied by (1 for a rate), held, N. */
  readonly terms: readonly { readonly features: Float32Array; readonly factor: Float64Array }[];
}

export function preparePieces(
  plant: Plant,
  scaling: Scaling,
  runs: readonly Run[],
  rates: readonly number[],
  features: readonly (readonly Feature[])[],
): PreparedPiece[] {
  const [n, m, p] = [plant.states.length, plant.inputs.length, plant.leftover.length];
  const points = [newRatesPoint(n, m, p), newRatesPoint(n, m, p)] as const;
  const seenStates = [...new Set(plant.unknowns.flatMap((term) => term.dependsOn))];
  return runs.flatMap((run) =>
    run.pieces.map(({ time, states, inputs }): PreparedPiece => {
      const count = time.length;
      const unexplained = new Float64Array(count * rates.length);
      const steps = Float64Array.from({ length: Math.max(0, count - 1) }, (_, k) => time[k + 1]! - time[k]!);
      const evaluate = (k: number): void =>
        plant.rates.evaluate(states.subarray(k * n, (k + 1) * n), points[(k & 1) as 0 | 1]);
      if (count > 0) evaluate(0);
      for (let k = 0; k + 1 < count; k++) {
        evaluate(k + 1);
        const [here, next] = [points[(k & 1) as 0 | 1], points[((k + 1) & 1) as 0 | 1]];
        for (const [r, i] of rates.entries()) {
          let rate = (here.f[i]! + next.f[i]!) / 2;
          for (let j = 0; j < m; j++) rate += ((here.B[i * m + j]! + next.B[i * m + j]!) / 2) * inputs[k * m + j]!;
          const moved = states[(k + 1) * n + i]! - states[k * n + i]!;
          unexplained[(k + 1) * rates.length + r] = unexplained[k * rates.length + r]! + moved - steps[k]! * rate;
        }
      }
      const cells = Int32Array.from({ length: count }, (_, k) =>
        seenStates.reduce((cell, i) => {
          const z = (states[k * n + i]! - scaling.stateCenter[i]!) / scaling.stateHalf[i]!;
          return cell * CELLS + Math.min(CELLS - 1, Math.max(0, Math.floor(((z + 1) / 2) * CELLS)));
        }, 0),
      );
      const terms = plant.unknowns.map(({ input }, j) => {
        const seen = features[j]!;
        const values = new Float32Array(count * seen.length);
        for (let k = 0; k < count; k++) {
          for (const [f, feature] of seen.entries()) {
            const { state } = feature;
            const z = (states[k * n + state]! - scaling.stateCenter[state]!) / scaling.stateHalf[state]!;
            values[k * seen.length + f] = featureValue(feature, z);
          }
        }
        const factor = Float64Array.from({ length: count }, (_, k) => (input === null ? 1 : inputs[k * m + input]!));
        return { features: values, factor };
      });
      return { count, steps, cells, unexplained, terms };
    }),
  );
}

/** A window of `length` steps from `start` in a piece: its duration, s. */
export function durationOf(piece: PreparedPiece, start: number, length: number): number {
  let sum = 0;
  for (let k = start; k < start + length; k++) sum += piece.steps[k]!;
  return sum;
}

/** Trapezoid weights q (length + 1) of a term over a window, divided by its duration. */
export function windowWeights(
  piece: PreparedPiece,
  term: number,
  start: number,
  length: number,
  duration: number,
  out: Float32Array,
  offset: number,
): void {
  const { factor } = piece.terms[term]!;
  out.fill(0, offset, offset + length + 1);
  for (let k = 0; k < length; k++) {
    const half = (piece.steps[start + k]! * factor[start + k]!) / (2 * duration);
    out[offset + k]! += half;
    out[offset + k + 1]! += half;
  }
}

export interface Window {
  readonly piece: PreparedPiece;
  readonly start: number;
}

/**
 * Draws windows of `length` steps evenly over the cells that their first samples lie in, so that a corner of the
 * envelope that few runs visit weighs as much as its middle.
 */
export function balancedWindows(pieces: readonly PreparedPiece[], length: number): (random: Random) => Window {
  const byCell = new Map<number, Window[]>();
  for (const piece of pieces) {
    for (let start = 0; start + length < piece.count; start++) {
      const cell = piece.cells[start]!;
      const held = byCell.get(cell);
      if (held === undefined) byCell.set(cell, [{ piece, start }]);
      else held.push({ piece, start });
    }
  }
  const cells = [...byCell.keys()].sort((a, b) => a - b).map((cell) => byCell.get(cell)!);
  return (random) => {
    const cell = cells[random.integer(cells.length)]!;
    return cell[random.integer(cell.length)]!;
  };
}
