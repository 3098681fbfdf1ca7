/**
 * What a network sees of a scaled state z: z_i itself, or for an angle sin and cos of its SI value
 * center_i + half_i z_i.
 */
import type { Plant } from "../plant/plant.js";
import { plantScaling } from "../plant/scaling.js";

export interface Feature {
  readonly state: number;
  readonly map: "value" | "sin" | "cos";
  /** SI value = center + half * z; used by sin and cos only. */
  readonly center: number;
  readonly half: number;
}

export function featuresOf(plant: Plant, states: readonly number[]): Feature[] {
  const scaling = plantScaling(plant);
  return states.flatMap((state): Feature[] => {
    const common = { state, center: scaling.stateCenter[state]!, half: scaling.stateHalf[state]! };
    if (!plant.states[state]!.isAngle) return [{ ...common, map: "value" }];
    return [
      { ...common, map: "sin" },
      { ...common, map: "cos" },
    ];
  });
}

/** Value of a feature and its derivative in z_state. */
export function featureValue(feature: Feature, z: number): number {
  if (feature.map === "value") return z;
  const angle = feature.center + feature.half * z;
  return feature.map === "sin" ? Math.sin(angle) : Math.cos(angle);
}

export function featureSlope(feature: Feature, z: number): number {
  if (feature.map === "value") return 1;
  const angle = feature.center + feature.half * z;
  return feature.half * (feature.map === "sin" ? Math.cos(angle) : -Math.sin(angle));
}
