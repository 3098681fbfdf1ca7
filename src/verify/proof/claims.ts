/** What is to be proved about a metric and a fitted model, and what a proof reads: saved artifacts only. */
import type { ResidualFile } from "../../model/controlAffine.js";
import type { DualMetricFile } from "../../nets/dualMetric.js";
import type { MetricField } from "../../nets/intervalMetric.js";
import type { Plant } from "../../plant/plant.js";
import type { MarginDirection } from "../spread.js";

/** A metric as a function builds the same proof, but cannot be sent to a worker. */
export interface ProofSubject {
  readonly plant: Plant;
  readonly residual: ResidualFile | null;
  readonly metric: DualMetricFile | MetricField;
}

/** At every state of the envelope and every input of its box. All in scaled states and inputs; times in seconds. */
export interface ProofClaims {
  /** lambda(z) >= rate, 1/s. */
  readonly rate: number;
  /** sum_i wbar_i sqrt(g_i^T W^{-1} g_i) <= most; wbar in SI of each leftover channel. */
  readonly sigma: { readonly wbar: readonly number[]; readonly most: number } | null;
  /** c^T W c <= most. */
  readonly spreads: readonly { readonly direction: MarginDirection; readonly most: number }[];
  /** rho sqrt(eigmax(B^T W^{-1} B)) <= most at the tube's rate, 1/s. */
  readonly authority: { readonly rate: number; readonly most: number } | null;
}

/**
 * Names of the claims as messages and tables use them. "definite" is what all rest on: W positive definite and B of full
 * column rank.
 */
export type ClaimName = "rate" | "sigma" | "spread" | "authority" | "definite";

/** Proved on one cell: each at least as good as the claim. */
export interface CellBounds {
  readonly rate: number;
  /** 0 when not claimed. */
  readonly sigma: number;
  readonly spreads: readonly number[];
  /** Authority density; 0 when not claimed. */
  readonly authority: number;
}
