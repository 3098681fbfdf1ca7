/**
 * Claims to prove from sampled extremes: each worse than what sampling saw by the gap, so that the proof has room and a
 * supremum that sampling missed by a little does not refute it.
 */
import type { MarginDirection } from "../spread.js";
import type { Survey } from "../survey.js";
import { aloneIn, type ProofClaims } from "./claims.js";

export interface ClaimRequest {
  /** SI, one a leftover channel. */
  readonly wbar: readonly number[];
  readonly directions: readonly MarginDirection[];
  /** Rate of the tube, 1/s; null: no authority is claimed. It must leave the proof room below the sampled worst rate. */
  readonly tubeRate: number | null;
  /** Share by which a claim is worse than the sampled extreme. */
  readonly gap: number;
}

/** Default gap. */
export const PROOF_GAP = 0.05;

export function sampledClaims(seen: Survey, { wbar, directions, tubeRate, gap }: ClaimRequest): ProofClaims {
  const more = (value: number): number => value * (1 + gap);
  const { rate } = seen.worst;
  return {
    rate: rate - gap * Math.abs(rate),
    pushes: aloneIn(wbar).map((alone) => ({
      wbar: alone,
      most: more(seen.sigma(Float64Array.from(alone)).value),
    })),
    spreads: directions.map((direction) => ({ direction, most: more(seen.spread(direction).value) })),
    authority: tubeRate === null ? null : { rate: tubeRate, most: more(seen.authorityDensity(tubeRate).value) },
  };
}
