/**
 * A refit, top to bottom:
 *   new runs against the earlier certificate -> (changed) plant file with the new logs -> the job, from where the earlier
 *   run ended -> what changed
 * The earlier run folder is read, never written.
 */

import { intakeLogs } from "../logs/intake.js";
import { LogError } from "../logs/logError.js";
import { readPlant } from "../plant/readPlant.js";
import { rewritePlant } from "../plant/rewritePlant.js";
import type { Change } from "../report/changeArtifacts.js";
import { planNewRuns } from "../residual/newRunPlan.js";
import { FILES } from "./artifacts.js";
import { type JobRequest, onceOpened, STAGES } from "./job.js";
import { runStage, type StageContext } from "./stage.js";
import { changeStage, saveUnchanged } from "./stages/changeStage.js";
import { type DriftFile, driftStage } from "./stages/driftStage.js";

export interface RefitRequest extends JobRequest {
  /** Refit although no change was found. */
  readonly isForced: boolean;
}

/** The request's plant is the earlier run's with the new log files. */
export async function runRefit(request: RefitRequest): Promise<Change> {
  const asked: StageContext = { ...request, engine: onceOpened() };
  request.finished(await runStage(driftStage, asked, false));
  const { isChanged } = request.folder.readJson<DriftFile>(FILES.drift);
  if (!isChanged && !request.isForced) return await saveUnchanged(asked);
  const context = await withNewRuns(asked);
  for (const stage of [...STAGES, changeStage]) request.finished(await runStage(stage, context, false));
  return request.folder.readJson<Change>(FILES.change);
}

/** The plant file for the new logs, with the confidence and split that so many runs allow. */
async function withNewRuns(context: StageContext): Promise<StageContext> {
  const { plant, plantText, plantPath } = context;
  const { runs } = await intakeLogs(plant);
  const allowed = planNewRuns(runs.length, plant.settings);
  if (allowed === null) {
    throw new LogError(
      plant.logs.files.join(", "),
      null,
      `${runs.length} runs are too few for a refit; give at least 4`,
    );
  }
  const text = rewritePlant(plantText, { logFiles: plant.logs.files, ...allowed });
  const read = readPlant(text, plantPath);
  if (!read.ok)
    throw new Error(`the rewritten plant file has problems: ${read.problems.map((p) => p.message).join("; ")}`);
  return { ...context, plant: read.plant, plantText: text };
}
