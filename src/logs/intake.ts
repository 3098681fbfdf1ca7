/** All logs of a plant into runs, with what was found on the way. */
import { createHash } from "node:crypto";
import { readFileSync } from "node:fs";
import type { Plant } from "../plant/plant.js";
import { checkRanges } from "./checkRanges.js";
import { cutRuns, type Finding } from "./cutRuns.js";
import { LogError } from "./logError.js";
import type { WantedColumns } from "./logTable.js";
import { readTable } from "./readTable.js";
import type { Run } from "./recording.js";

export interface Intake {
  readonly runs: readonly Run[];
  readonly findings: readonly Finding[];
  readonly files: readonly { readonly path: string; readonly rows: number; readonly runs: number }[];
  /** Median step and the 99th percentile of its deviation, s. */
  readonly sampleInterval: number;
  readonly jitter: number;
}

export async function intakeLogs(
  plant: Plant,
  progress: (done: number, total: number, note: string) => void = () => undefined,
): Promise<Intake> {
  const { logs } = plant;
  const wanted: WantedColumns = {
    numbers: [...new Set([logs.time, ...logs.states, ...logs.inputs].map(({ column }) => column))],
    run: logs.run,
  };
  const runs: Run[] = [];
  const findings: Finding[] = [];
  const files: { path: string; rows: number; runs: number }[] = [];
  for (const [done, path] of logs.files.entries()) {
    progress(done, logs.files.length, path);
    const table = await readTable(path, wanted);
    const cut = cutRuns(plant, table);
    runs.push(...cut.runs);
    findings.push(...cut.findings, ...checkRanges(plant, path, cut.runs));
    files.push({ path, rows: table.rows, runs: cut.runs.length });
  }
  if (runs.length === 0) {
    throw new LogError(
      logs.files.join(", "),
      null,
      `no usable run: ${findings.map((finding) => finding.text).join("; ")}`,
    );
  }
  const steps = runs.flatMap((run) =>
    run.pieces.flatMap((piece) => Array.from(piece.time.subarray(1), (t, k) => t - piece.time[k]!)),
  );
  steps.sort((a, b) => a - b);
  const sampleInterval = steps[steps.length >> 1]!;
  const deviations = steps.map((step) => Math.abs(step - sampleInterval)).sort((a, b) => a - b);
  return { runs, findings, files, sampleInterval, jitter: deviations[Math.floor(0.99 * (deviations.length - 1))]! };
}

/** SHA-256 of every log by path, for the manifest. */
export function hashLogs(plant: Plant): Record<string, string> {
  return Object.fromEntries(
    plant.logs.files.map((path) => {
      try {
        return [path, createHash("sha256").update(readFileSync(path)).digest("hex")];
      } catch {
        throw new LogError(
          path,
          null,
          "no such file, or it cannot be read; logs.files of the plant file names the logs, relative to it",
        );
      }
    }),
  );
}
