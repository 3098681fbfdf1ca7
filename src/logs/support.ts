/**
 * Where the logs hold states: the distance from a scaled state to the nearest logged sample, in the states that
 * the unknown terms depend on (elsewhere the model is the prior and needs no log). Within `radius` a state is supported.
 * The search is a grid of cells of that size, exact up to the radius.
 */
import { sobolPoints } from "../num/sobol.js";
import type { Plant } from "../plant/plant.js";
import { plantScaling } from "../plant/scaling.js";
import type { Run } from "./recording.js";

export interface Support {
  /** States of the distance; empty when nothing is unknown: then everything is supported. */
  readonly states: readonly number[];
  readonly radius: number;
  /** Distance from a scaled state z (n) to the nearest sample, where the envelope's half-range is 1; Infinity beyond reach. */
  distance(z: Float64Array): number;
  /** Share of the envelope, over Sobol points, that is farther than the radius from every sample. */
  readonly unsupportedShare: number;
}

export const SUPPORT_RADIUS = 0.3;
const POINTS = 4096;

export function supportOf(plant: Plant, runs: readonly Run[]): Support {
  const states = [...new Set(plant.unknowns.flatMap((term) => term.dependsOn))].sort((a, b) => a - b);
  const radius = SUPPORT_RADIUS;
  const d = states.length;
  if (d === 0) return { states, radius, distance: () => 0, unsupportedShare: 0 };
  const { stateCenter, stateHalf } = plantScaling(plant);
  const n = plant.states.length;
  const cells = new Map<string, number[]>();
  const cellOf = (z: number): number => Math.floor(z / radius);
  for (const run of runs) {
    for (const piece of run.pieces) {
      for (let k = 0; k < piece.time.length; k++) {
        const z = states.map((i) => (piece.states[k * n + i]! - stateCenter[i]!) / stateHalf[i]!);
        const key = z.map(cellOf).join(",");
        const held = cells.get(key);
        if (held === undefined) cells.set(key, z);
        else held.push(...z);
      }
    }
  }
  const nearest = (at: readonly number[]): number => {
    let best = Number.POSITIVE_INFINITY;
    for (const key of neighbours(at.map(cellOf))) {
      const held = cells.get(key);
      if (held === undefined) continue;
      for (let s = 0; s < held.length; s += d) {
        let square = 0;
        for (let i = 0; i < d; i++) square += (held[s + i]! - at[i]!) ** 2;
        best = Math.min(best, square);
      }
    }
    return Math.sqrt(best);
  };
  const points = sobolPoints(d, POINTS, 1);
  let unsupported = 0;
  for (let p = 0; p < POINTS; p++) {
    const at = Array.from({ length: d }, (_, i) => 2 * points[p * d + i]! - 1);
    if (nearest(at) > radius) unsupported++;
  }
  return {
    states,
    radius,
    distance: (z) => nearest(states.map((i) => z[i]!)),
    unsupportedShare: unsupported / POINTS,
  };
}

function neighbours(cell: readonly number[]): string[] {
  return cell
    .reduce<number[][]>((heads, c) => heads.flatMap((head) => [-1, 0, 1].map((step) => [...head, c + step])), [[]])
    .map((key) => key.join(","));
}
