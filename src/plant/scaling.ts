/**
 * Scaling to unit half-range: x = center + half * z, so that the envelope is the box [-1, 1]^n; the same for inputs.
 * A position pair under a declared rotation shares the larger half-range and so stays a rotation in z.
 */
import type { Plant } from "./plant.js";

export interface Scaling {
  /** n, SI. */
  readonly stateCenter: Float64Array;
  readonly stateHalf: Float64Array;
  /** m, SI. */
  readonly inputCenter: Float64Array;
  readonly inputHalf: Float64Array;
}

export function plantScaling(plant: Plant): Scaling {
  const center = (c: { min: number; max: number }): number => (c.min + c.max) / 2;
  const half = (c: { min: number; max: number }): number => (c.max - c.min) / 2;
  const stateHalf = Float64Array.from(plant.states, half);
  if (plant.symmetry.rotation !== null) {
    const [a, b] = plant.symmetry.rotation.position;
    stateHalf[a] = stateHalf[b] = Math.max(stateHalf[a]!, stateHalf[b]!);
  }
  return {
    stateCenter: Float64Array.from(plant.states, center),
    stateHalf,
    inputCenter: Float64Array.from(plant.inputs, center),
    inputHalf: Float64Array.from(plant.inputs, half),
  };
}

/** Indices of the states a certificate must cover: all but translations and a rotated heading. */
export function activeStates(plant: Plant): number[] {
  const { translation, rotation } = plant.symmetry;
  return plant.states.map((_, i) => i).filter((i) => !translation.includes(i) && i !== rotation?.heading);
}
