/** Histograms of the logged states over the envelope, in the plant's units: plain numbers for the report. */
import type { Plant } from "../plant/plant.js";
import { activeStates } from "../plant/scaling.js";
import type { Run } from "./recording.js";

export interface StateCoverage {
  readonly name: string;
  readonly unit: string;
  readonly edges: readonly number[];
  readonly counts: readonly number[];
  /** Samples below and above the envelope. */
  readonly outside: number;
}

const BINS = 24;

export function coverageOf(plant: Plant, runs: readonly Run[]): StateCoverage[] {
  const n = plant.states.length;
  return activeStates(plant).map((i) => {
    const { name, unit, min, max } = plant.states[i]!;
    const counts = new Array<number>(BINS).fill(0);
    let outside = 0;
    for (const run of runs) {
      for (const piece of run.pieces) {
        for (let at = i; at < piece.states.length; at += n) {
          const value = piece.states[at]!;
          // the last bin holds its upper edge: a value on the envelope's face is inside it
          const bin = value === max ? BINS - 1 : Math.floor((BINS * (value - min)) / (max - min));
          if (bin < 0 || bin >= BINS) outside++;
          else counts[bin]!++;
        }
      }
    }
    const edges = Array.from({ length: BINS + 1 }, (_, b) => (min + ((max - min) * b) / BINS) / unit.factor);
    return { name, unit: unit.name, edges, counts, outside };
  });
}
