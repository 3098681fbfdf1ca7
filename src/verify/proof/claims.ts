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
  /**
   * sum_i wbar_i sqrt(g_i^T W^{-1} g_i) <= most, one entry a claim; wbar in SI of each leftover channel. A tube over windows
   * claims each channel by itself (aloneIn): within a window the channels may be worst at different states.
   */
  readonly pushes: readonly { readonly wbar: readonly number[]; readonly most: number }[];
  /** c^T W c <= most. */
  readonly spreads: readonly { readonly direction: MarginDirection; readonly most: number }[];
  /** rho sqrt(eigmax(B^T W^{-1} B)) <= most at the tube's rate, 1/s. */
  readonly authority: { readonly rate: number; readonly most: number } | null;
}

/** The claims of which there is one entry a push or a spread: tables hold their bounds in this order. */
export type ListedClaims = Pick<ProofClaims, "pushes" | "spreads">;

/**
 * Names of the claims as messages and tables use them. "definite" is what all rest on: W positive definite and B of full
 * column rank.
 */
export type ClaimName = "rate" | "push" | "spread" | "authority" | "definite";

/** Proved on one cell: each at least as good as the claim. */
export interface CellBounds {
  readonly rate: number;
  readonly pushes: readonly number[];
  readonly spreads: readonly number[];
  /** Authority density; 0 when not claimed. */
  readonly authority: number;
}

/** The bounds of one channel by itself, one entry a channel. */
export function aloneIn(wbar: readonly number[]): number[][] {
  return wbar.map((bound, c) => wbar.map((_, i) => (i === c ? bound : 0)));
}
