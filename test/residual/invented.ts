// Invented plants and runs whose truth is known; all numbers made up for the tests.
import { rungeKutta } from "../../data/make/simulate.js";
import type { Piece, Run } from "../../src/logs/recording.js";
import type { Plant } from "../../src/plant/plant.js";
import { plantOf } from "../plant/reading.js";

const REST = `
logs:
  files: [made-up.csv]
margin:
  minimise: speed
`;

/** A cart: speed' = accel + what is declared; one push on the speed, and optionally a slip of the position. */
export function cart(parts: { speed?: string; unknown?: string; leftover?: string; settings?: string } = {}): Plant {
  return plantOf(`
plant: cart
states:
  place: { unit: m, envelope: [-30, 30] }
  speed: { unit: m/s, envelope: [-1, 3] }
inputs:
  accel: { unit: m/s^2, range: [-1, 2] }
rates:
  place: speed
  speed: ${parts.speed ?? "accel"}
unknown: ${parts.unknown ?? "[]"}
leftover:
${parts.leftover ?? "  push: { unit: m/s^2, on: { speed: 1 } }"}
${parts.settings ?? ""}${REST}`);
}

/** A rover on the plane with slips held in the body frame. */
export function rover(): Plant {
  return plantOf(`
plant: rover
states:
  px: { unit: m, envelope: [-10, 10] }
  py: { unit: m, envelope: [-20, 20] }
  heading: { unit: deg, envelope: [-180, 180] }
  speed: { unit: m/s, envelope: [0.5, 2.5] }
inputs:
  drive: { unit: m/s^2, range: [-1, 1] }
  turn: { unit: rad/s, range: [-0.8, 0.8] }
rates:
  px: speed * cos(heading)
  py: speed * sin(heading)
  heading: turn
  speed: drive
leftover:
  along: { unit: m/s, on: { px: cos(heading), py: sin(heading) } }
  across: { unit: cm/s, on: { px: -sin(heading), py: cos(heading) } }
  turnDrift: { unit: deg/s, on: { heading: 1 } }
symmetry:
  rotation: { position: [px, py], heading: heading }
${REST}`);
}

export function evenTimes(step: number, seconds: number): Float64Array {
  return Float64Array.from({ length: Math.round(seconds / step) + 1 }, (_, k) => k * step);
}

/** A piece from functions of time, SI. */
export function piece(
  time: Float64Array,
  states: (t: number) => readonly number[],
  inputs: (t: number) => readonly number[],
): Piece {
  return {
    time,
    states: Float64Array.from([...time].flatMap((t) => [...states(t)])),
    inputs: Float64Array.from([...time].flatMap((t) => [...inputs(t)])),
  };
}

export function runOf(id: string, ...pieces: Piece[]): Run {
  return { id, file: "made-up.csv", pieces };
}

/**
 * A simulated run: classical Runge-Kutta at a fifth of the log's step, the input held between samples, white sensor noise
 * of one size on every state. `law` is called once a sample with the true state.
 */
export function simulated(
  id: string,
  truth: {
    readonly rates: (x: readonly number[], u: readonly number[], t: number) => number[];
    readonly law: (t: number, x: readonly number[]) => readonly number[];
    readonly start: readonly number[];
  },
  time: Float64Array,
  sensor: () => number,
): Run {
  let x: readonly number[] = truth.start;
  const [states, inputs]: [number[], number[]] = [[], []];
  for (const [k, t] of time.entries()) {
    const u = truth.law(t, x);
    states.push(...x.map((value) => value + sensor()));
    inputs.push(...u);
    const h = ((time[k + 1] ?? t) - t) / 5;
    for (let s = 0; s < 5; s++) x = rungeKutta((at, y) => truth.rates(y, u, at), t + s * h, x, h);
  }
  return runOf(id, { time, states: Float64Array.from(states), inputs: Float64Array.from(inputs) });
}

export const clamped = (value: number, low: number, high: number): number => Math.min(high, Math.max(low, value));
