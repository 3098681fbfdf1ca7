/**
 * Worker threads that examine the batches of prove.ts. A batch is cut into shares of fixed size that idle workers take in
 * turn; results return in the order of the cells, so the outcome is the same for any number of workers.
 */
import { existsSync } from "node:fs";
import { fileURLToPath } from "node:url";
import { Worker } from "node:worker_threads";
import type { OpenCell } from "./cellHeap.js";
import type { CellResult } from "./cellProver.js";
import type { ProofClaims, ProofSubject } from "./claims.js";
import type { SentCells, SentProof, SentResults } from "./proofWorker.js";
import type { BatchExaminer } from "./prove.js";

export interface ProofWorkers {
  readonly examine: BatchExaminer;
  close(): Promise<void>;
}

const SHARE = 16;

/** Null where no worker can be had: the code is not built, or the metric is a function. The proof then runs in this thread. */
export function proofWorkers(subject: ProofSubject, claims: ProofClaims, count: number): ProofWorkers | null {
  const script = new URL("./proofWorker.js", import.meta.url);
  const { plant, residual, metric } = subject;
  if (typeof metric === "function" || count < 1 || !existsSync(fileURLToPath(script))) return null;
  const { rates: _compiled, ...sendable } = plant;
  const workerData: SentProof = { plant: sendable, residual, metric, claims };
  const workers = Array.from({ length: count }, () => new Worker(script, { workerData }));
  return {
    examine: (cells) => shareOut(workers, cells),
    close: async () => {
      await Promise.all(workers.map((worker) => worker.terminate()));
    },
  };
}

async function shareOut(workers: readonly Worker[], cells: readonly OpenCell[]): Promise<readonly CellResult[]> {
  const results: CellResult[] = new Array<CellResult>(cells.length);
  let next = 0;
  const work = async (worker: Worker): Promise<void> => {
    while (next < cells.length) {
      const from = next;
      next += SHARE;
      const share = cells.slice(from, next).map(({ lower, upper }) => ({ lower, upper }));
      const reply = await ask(worker, { cells: share });
      if ("error" in reply) throw new Error(`a proof worker failed: ${reply.error}`);
      for (const [i, result] of reply.results.entries()) results[from + i] = result;
    }
  };
  await Promise.all(workers.map(work));
  return results;
}

function ask(worker: Worker, message: SentCells): Promise<SentResults> {
  return new Promise((resolve, reject) => {
    const done = (): void => {
      worker.off("message", onMessage);
      worker.off("error", onError);
      worker.off("exit", onExit);
    };
    const onMessage = (reply: SentResults): void => {
      done();
      resolve(reply);
    };
    const onError = (error: Error): void => {
      done();
      reject(error);
    };
    const onExit = (code: number): void => {
      done();
      reject(new Error(`a proof worker ended with exit status ${code}`));
    };
    worker.on("message", onMessage);
    worker.on("error", onError);
    worker.on("exit", onExit);
    worker.postMessage(message);
  });
}
