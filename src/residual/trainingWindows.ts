/**
 * The fit as a linear reading of the networks over windows. With t_j(x) the unknown terms and h_k the step lengths,
 *   (x(t+T) - x(t)) / T - (1/T) sum_k h_k [prior, trapezoid in x, input held] = sum_j sum_k q_jk t_j(x_k)
 * q_jk are the trapezoid's weights, times the held inputs for a gain. The sum over samples k becomes one over nodes,
 * every `stride`-th sample: between nodes t_j(x(t)) is taken as linear in time, while the weights keep every held input.
 * That costs h^2/12 of the second derivative of t_j(x(t)), far below the sensor noise at nodes 0.1 s apart, and a fifth of
 * the time at 50 Hz (test/residual/trainingWindows.test.ts). All in SI.
 */
import type { Run } from "../logs/recording.js";
import { type Feature, featureValue } from "../nets/features.js";
import type { Random } from "../num/random.js";
import { newRatesPoint, type Plant } from "../plant/plant.js";
import type { Scaling } from "../plant/scaling.js";

/** Cells a state of the grid that windows are drawn evenly over. */
const CELLS = 5;

/** One piece of N samples, prepared once: windows are cut from it by start index. */
export interface PreparedPiece {
  /** s, N. */
  readonly time: Float64Array;
  /** N: cell of each sample on a coarse grid over the states that the unknown terms depend on. */
  readonly cells: Int32Array;
  /** N x rates: running sum of (dx - step integral of the prior) per unknown rate. */
  readonly unexplained: Float64Array;
  /** Per term: features N x F, and the held input that it is multiplied by (1 for a rate), N. */
  readonly terms: readonly { readonly features: Float32Array; readonly factor: Float64Array }[];
}

/** A window from sample `start` over as many steps as the fit has chosen for all its windows. */
export interface Window {
  readonly piece: PreparedPiece;
  readonly start: number;
}

/** Steps of a window, a multiple of the stride; nodes are `stride` steps apart. */
export interface WindowShape {
  readonly length: number;
  readonly stride: number;
}

/** The shape of windows of about `window` seconds with nodes about `spacing` apart, at a median step of `step` (all s). */
export function windowShape(step: number, window: number, spacing: number): WindowShape {
  const stride = Math.max(1, Math.round(spacing / step));
  return { stride, length: stride * Math.max(2, Math.round(window / (stride * step))) };
}

/** rates: states with an unknown term; features: per term of the plant. */
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
      const scaled = (k: number, i: number): number =>
        (states[k * n + i]! - scaling.stateCenter[i]!) / scaling.stateHalf[i]!;
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
          unexplained[(k + 1) * rates.length + r] =
            unexplained[k * rates.length + r]! + moved - (time[k + 1]! - time[k]!) * rate;
        }
      }
      const cells = Int32Array.from({ length: count }, (_, k) =>
        seenStates.reduce((cell, i) => {
          const part = Math.floor(((scaled(k, i) + 1) / 2) * CELLS);
          return cell * CELLS + Math.min(CELLS - 1, Math.max(0, part));
        }, 0),
      );
      const terms = plant.unknowns.map(({ input }, j) => {
        const seen = features[j]!;
        const values = new Float32Array(count * seen.length);
        for (let k = 0; k < count; k++) {
          for (const [f, feature] of seen.entries()) {
            values[k * seen.length + f] = featureValue(feature, scaled(k, feature.state));
          }
        }
        const factor = Float64Array.from({ length: count }, (_, k) => (input === null ? 1 : inputs[k * m + input]!));
        return { features: values, factor };
      });
      return { time, cells, unexplained, terms };
    }),
  );
}

/** What the prior leaves of the mean rate number r (of `rates` rates) over a window, SI per second. */
export function windowTarget({ piece, start }: Window, r: number, rates: number, { length }: WindowShape): number {
  const moved = piece.unexplained[(start + length) * rates + r]! - piece.unexplained[start * rates + r]!;
  return moved / (piece.time[start + length]! - piece.time[start]!);
}

/**
 * The weights of one term at the nodes of a window, into out from `offset` (length / stride + 1 of them): their sum with
 * the term's values there is the term's part of the mean rate.
 */
export function nodeWeights(
  { piece, start }: Window,
  term: number,
  { length, stride }: WindowShape,
  out: Float32Array,
  offset: number,
): void {
  const { time } = piece;
  const { factor } = piece.terms[term]!;
  const duration = time[start + length]! - time[start]!;
  out.fill(0, offset, offset + length / stride + 1);
  for (let from = 0, node = offset; from < length; from += stride, node++) {
    const [left, right] = [time[start + from]!, time[start + from + stride]!];
    for (let k = start + from; k < start + from + stride; k++) {
      const half = ((time[k + 1]! - time[k]!) * factor[k]!) / (2 * duration);
      // both ends of the step, each shared between the nodes beside it
      const share = (time[k]! + time[k + 1]! - 2 * left) / (right - left);
      out[node]! += half * (2 - share);
      out[node + 1]! += half * share;
    }
  }
}

/**
 * Draws windows evenly over the cells that their first samples lie in, so that a corner of the envelope that few runs
 * visit weighs as much as its middle. Null when no piece holds a window.
 */
export function balancedWindows(
  pieces: readonly PreparedPiece[],
  { length }: WindowShape,
): ((random: Random) => Window) | null {
  const byCell = new Map<number, Window[]>();
  for (const piece of pieces) {
    for (let start = 0; start + length < piece.time.length; start++) {
      const cell = piece.cells[start]!;
      const held = byCell.get(cell);
      if (held === undefined) byCell.set(cell, [{ piece, start }]);
      else held.push({ piece, start });
    }
  }
  if (byCell.size === 0) return null;
  const cells = [...byCell.keys()].sort((a, b) => a - b).map((cell) => byCell.get(cell)!);
  return (random) => {
    const cell = cells[random.integer(cells.length)]!;
    return cell[random.integer(cell.length)]!;
  };
}
