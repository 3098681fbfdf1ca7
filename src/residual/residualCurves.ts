/** Placeholder while the owner of this file writes it: fitted curves come from there. */
import type { Run } from "../logs/recording.js";
import type { ResidualFile } from "../model/controlAffine.js";
import type { Plant } from "../plant/plant.js";

export interface ResidualCurve {
  readonly title: string;
  readonly unit: string;
  readonly x: { readonly name: string; readonly unit: string; readonly values: readonly number[] };
  readonly fitted: readonly number[];
  readonly logged: readonly { readonly x: number; readonly y: number }[];
}

export function residualCurves(_plant: Plant, _residual: ResidualFile, _runs: readonly Run[]): ResidualCurve[] {
  return [];
}
