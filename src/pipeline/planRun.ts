/** The tube along a plan from a run folder: reads the learned certificate and its boxes, writes into a folder of its own. */
import { readSavedTable, writeTable } from "../logs/savedTable.js";
import type { ResidualFile } from "../model/controlAffine.js";
import type { Plant } from "../plant/plant.js";
import type { Summary } from "../report/artifacts.js";
import type { PlanSummary } from "../report/planArtifacts.js";
import { FILES, type MetricArtifact, readBounds } from "./artifacts.js";
import { boxesFromColumns } from "./boxesTable.js";
import type { CertificateFile } from "./certificate.js";
import { planTubeJob } from "./planStage.js";
import { tubeClaims } from "./proveTube.js";
import { type RunFolder, RunFolderError } from "./runFolder.js";

export const PLAN_FILES = { summary: "plan-tube.json", table: "plan-tube.arrow", page: "plan-tube.html" } as const;

export interface PlanRunRequest {
  readonly folder: RunFolder;
  readonly plant: Plant;
  readonly planPath: string;
  readonly law: "fixed" | "plan";
  readonly out: RunFolder;
  readonly progress: (done: number, total: number, note: string) => void;
  readonly signal: AbortSignal;
}

/** Throws RunFolderError when the run holds no proof, LogError when the plan cannot be read. */
export async function runPlan(request: PlanRunRequest): Promise<PlanSummary> {
  const { folder, plant, planPath, law, out, progress, signal } = request;
  const evidence = folder
    .readJson<CertificateFile[]>(FILES.certificates)
    .find(({ name }) => name === "learned")?.evidence;
  const made = folder.readJson<MetricArtifact>(FILES.learned);
  if (evidence?.tube == null || made.status === "absent" || !folder.has(FILES.boxes)) {
    throw new RunFolderError(
      `${folder.path}: the learned metric has no proof there, so there are no bounds along a plan`,
    );
  }
  const { tube } = evidence;
  const disturbance = readBounds(folder, "fitted");
  const learned = folder.readJson<Summary>(FILES.summary).certificates.find(({ name }) => name === "learned");
  const outcome = await planTubeJob({
    certificate: { plant, residual: folder.readJson<ResidualFile>(FILES.residual), metric: made.metric },
    tube,
    fixedHolds: learned?.status === "holds",
    boxes: boxesFromColumns(
      plant,
      readSavedTable(folder.file(FILES.boxes)),
      tubeClaims(tube, Array.from(disturbance.wbar)),
    ),
    disturbance,
    planPath,
    law,
    progress,
    signal,
  });
  out.writeJson(PLAN_FILES.summary, outcome.summary);
  writeTable(out.file(PLAN_FILES.table), outcome.columns, {});
  out.writeText(PLAN_FILES.page, outcome.page);
  return outcome.summary;
}
