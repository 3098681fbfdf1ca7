/**
 * The worker's side of proofWorkers.ts: builds the prover from the artifacts it is sent, then examines cells. Loaded as
 * built JavaScript.
 */
import { type MessagePort, parentPort, workerData } from "node:worker_threads";
import { compileRates } from "../../plant/compileRates.js";
import type { Plant } from "../../plant/plant.js";
import { type CellResult, cellProver } from "./cellProver.js";
import type { ProofClaims, ProofSubject } from "./claims.js";

/** A subject less its compiled code, which cannot be sent. */
export interface SentProof {
  readonly plant: Omit<Plant, "rates">;
  readonly residual: ProofSubject["residual"];
  readonly metric: Exclude<ProofSubject["metric"], (...args: never[]) => unknown>;
  readonly claims: ProofClaims;
}

export interface SentCells {
  readonly cells: readonly { readonly lower: Float64Array; readonly upper: Float64Array }[];
}

/** Results in the order of the cells, or what went wrong. */
export type SentResults = { readonly results: readonly CellResult[] } | { readonly error: string };

function serve(port: MessagePort, { plant, residual, metric, claims }: SentProof): void {
  const rates = compileRates(plant.expressions);
  const prover = cellProver({ plant: { ...plant, rates }, residual, metric }, claims);
  port.on("message", ({ cells }: SentCells) => {
    let reply: SentResults;
    try {
      reply = { results: cells.map(({ lower, upper }) => prover.examine(lower, upper)) };
    } catch (error) {
      reply = { error: (error as Error).message };
    }
    port.postMessage(reply);
  });
}

if (parentPort !== null) serve(parentPort, workerData as SentProof);
