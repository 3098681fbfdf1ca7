/** The claims of a certified tube, put to the prover over the whole envelope on worker threads. */
import type { ResidualFile } from "../model/controlAffine.js";
import type { DualMetricFile } from "../nets/dualMetric.js";
import type { Plant } from "../plant/plant.js";
import { aloneIn, type ProofClaims, type ProofSubject } from "../verify/proof/claims.js";
import { proofWorkers } from "../verify/proof/proofWorkers.js";
import { type ProofResult, prove } from "../verify/proof/prove.js";
import type { CertifiedTube } from "./certifyMetric.js";

/** Plant, residual (null: the prior alone) and metric as saved. */
export interface SavedCertificate {
  readonly plant: Plant;
  readonly residual: ResidualFile | null;
  readonly metric: DualMetricFile;
}

export interface ProofRun {
  readonly workers: number;
  readonly progress: (done: number, total: number, note: string) => void;
  readonly signal: AbortSignal;
}

/** Cells that a proof inside a run may examine; a boat's takes some ten thousand. */
const MOST_BOXES = 120_000;

/** wbar: SI, one a leftover channel. */
export function tubeClaims(tube: CertifiedTube, wbar: readonly number[]): ProofClaims {
  return {
    rate: tube.claimedRate,
    pushes: aloneIn(wbar).map((alone, c) => ({ wbar: alone, most: tube.pushes[c]! })),
    spreads: tube.spreads.map(({ direction, value }) => ({ direction, most: value })),
    authority: { rate: tube.rate, most: tube.authorityDensity },
  };
}

/** Throws when the signal aborts: an interrupted proof is not an open one. */
export async function proveClaims(
  subject: SavedCertificate,
  claims: ProofClaims,
  { workers, progress, signal }: ProofRun,
  mostBoxes: number = MOST_BOXES,
): Promise<ProofResult> {
  const pool = proofWorkers(subject satisfies ProofSubject, claims, workers);
  try {
    const result = await prove(subject, claims, {
      maxBoxes: mostBoxes,
      signal,
      onProgress: ({ provedShare, boxes, openBoxes }) =>
        progress(provedShare, 1, `${boxes} boxes examined, ${openBoxes} open`),
      ...(pool === null ? {} : { examine: pool.examine }),
    });
    signal.throwIfAborted();
    return result;
  } finally {
    await pool?.close();
  }
}
