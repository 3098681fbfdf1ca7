/**
 * The job, top to bottom:
 *   logs -> runs -> missing dynamics -> what stays unexplained -> analytic metrics -> learned metric -> evidence -> report
 * Each stage reads and makes files of the run folder; what is there from the same inputs is kept.
 */

import type { Engine } from "../engine/openEngine.js";
import { openEngine } from "../engine/openEngine.js";
import type { Summary } from "../report/artifacts.js";
import { FILES } from "./artifacts.js";
import { runStage, type Stage, type StageContext, type StageOutcome } from "./stage.js";
import { analyticStage } from "./stages/analyticStage.js";
import { boundStage } from "./stages/boundStage.js";
import { certifyStage } from "./stages/certifyStage.js";
import { intakeStage } from "./stages/intakeStage.js";
import { metricStage } from "./stages/metricStage.js";
import { reportStage } from "./stages/reportStage.js";
import { residualStage } from "./stages/residualStage.js";

export const STAGES: readonly Stage[] = [
  intakeStage,
  residualStage,
  boundStage,
  analyticStage,
  metricStage,
  certifyStage,
  reportStage,
];

export interface JobRequest extends Omit<StageContext, "engine"> {
  readonly finished: (stage: StageOutcome) => void;
}

export interface JobOutcome {
  readonly summary: Summary;
}

/** The whole job, from the first stage that is not there as it would be made. */
export async function runJob(request: JobRequest): Promise<JobOutcome> {
  const context: StageContext = { ...request, engine: onceOpened() };
  for (const stage of STAGES) request.finished(await runStage(stage, context, false));
  return { summary: request.folder.readJson<Summary>(FILES.summary) };
}

/** One stage again, whatever is there. */
export async function runOneStage(stage: Stage, request: JobRequest): Promise<StageOutcome> {
  const outcome = await runStage(stage, { ...request, engine: onceOpened() }, true);
  request.finished(outcome);
  return outcome;
}

export function onceOpened(): () => Promise<Engine> {
  let opened: Promise<Engine> | null = null;
  return () => {
    opened ??= openEngine();
    return opened;
  };
}
