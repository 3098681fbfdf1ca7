/**
 * The tube along a given plan: read it, check it, lay the tube over the proved cells around it, and put what comes out
 * beside the fixed tube in the plant's units.
 */
import { readPlan } from "../logs/readPlan.js";
import type { SavedColumn } from "../logs/savedTable.js";
import { fittedModel } from "../model/fittedModel.js";
import { dualMetric } from "../nets/dualMetric.js";
import { plantScaling } from "../plant/scaling.js";
import type { PlanPicture, PlanRow, PlanSummary } from "../report/planArtifacts.js";
import { renderPlanPage } from "../report/planPage.js";
import { motionProblem, rangeProblems } from "../tube/planChecks.js";
import { planMotion } from "../tube/planSteps.js";
import { planTube } from "../tube/planTube.js";
import type { LeafTable } from "../verify/proof/leafTable.js";
import type { CertifiedTube } from "./certifyMetric.js";
import { type PlanCells, planCells } from "./planCells.js";
import { fastestLaw, type PlanLaw } from "./planRate.js";
import { marginNames, planPicture, planRows, planSummary } from "./planResult.js";
import { type SavedCertificate, tubeClaims } from "./proveTube.js";

export interface PlanTubeJob {
  readonly certificate: SavedCertificate;
  /** The certificate's fixed tube, and the leaf boxes of its proof (be it of a part only). */
  readonly tube: CertifiedTube;
  /** Whether the fixed tube holds all over the envelope: its numbers are shown only then. */
  readonly fixedHolds: boolean;
  readonly boxes: LeafTable;
  /** Disturbance bound of the certificate's model: SI, one a leftover channel; window in s. */
  readonly disturbance: { readonly wbar: Float64Array; readonly window: number };
  readonly planPath: string;
  /** fixed: the certificate's rate. plan: the fastest that is proved around this plan within the authority limit. */
  readonly law: "fixed" | "plan";
  readonly progress?: (done: number, total: number, note: string) => void;
  readonly signal?: AbortSignal;
}

export interface PlanTubeOutcome {
  readonly summary: PlanSummary;
  /** Of plan-tube.arrow; without rows when the plan is refused. */
  readonly columns: readonly SavedColumn[];
  readonly page: string;
}

/**
 * Throws a LogError when the plan cannot be read. A plan that is outside the envelope or no motion of the model is refused in
 * the summary, by name, time and value.
 */
export async function planTubeJob(job: PlanTubeJob): Promise<PlanTubeOutcome> {
  const { certificate, tube, fixedHolds, boxes, disturbance, planPath } = job;
  const { plant, residual, metric } = certificate;
  const progress = job.progress ?? (() => undefined);
  const model = fittedModel(plant, residual);
  const plan = await readPlan(plant, planPath);
  const ranges = rangeProblems(plant, plan);
  const motion = planMotion(model, dualMetric(metric), plantScaling(plant), plan, disturbance.window);
  const { share, problem } = motionProblem(plant, plan, motion, disturbance.window, tube.sigma);
  const problems = problem === null ? ranges : [...ranges, problem];
  const cells = planCells(certificate, tubeClaims(tube, Array.from(disturbance.wbar)), boxes, model.active);
  const request = {
    steps: motion.steps,
    rate: tube.rate,
    window: disturbance.window,
    initialDistance: plant.settings.initialDistance,
  };
  const lay = (): PlanLaw => {
    let asked = 0;
    const local: PlanCells["local"] = (lower, upper) => {
      job.signal?.throwIfAborted();
      if (asked++ % 64 === 0)
        progress(Math.min(asked / 2, motion.steps.length), motion.steps.length, `${cells.count} cells`);
      return cells.local(lower, upper);
    };
    const base = planTube({ ...request, local });
    if (job.law === "fixed") return { rate: tube.rate, laid: base };
    return fastestLaw(request, base, cells, plant.settings.authorityLimit, progress);
  };
  const law = problems.length > 0 ? null : lay();
  const laid = law?.laid ?? null;
  const context = {
    plant,
    model,
    plan,
    motion,
    tube,
    fixedHolds,
    rate: law?.rate ?? tube.rate,
    window: disturbance.window,
    cells,
  };
  const rows = laid === null ? [] : planRows(context, laid);
  const summary = planSummary(context, laid, rows, problems, share);
  const picture: PlanPicture = planPicture(context, rows);
  return { summary, columns: columnsOf(context, rows), page: await renderPlanPage(summary, picture) };
}

/** Table plan-tube.arrow: one row from each sample to the next. */
function columnsOf({ plant, plan, tube }: Parameters<typeof planRows>[0], rows: readonly PlanRow[]): SavedColumn[] {
  const n = plant.states.length;
  const numbers = (value: (row: PlanRow, k: number) => number): Float64Array => Float64Array.from(rows, value);
  return [
    { name: "time", unit: "s", values: numbers(({ time }) => time) },
    { name: "until", unit: "s", values: numbers(({ until }) => until) },
    ...plant.states.map(({ name, unit }, i) => ({
      name: `plan.${name}`,
      unit: unit.name,
      values: numbers((_, k) => plan.states[k * n + i]! / unit.factor),
    })),
    ...marginNames(plant, tube).map(({ name, unit }, s) => ({
      name: `margin.${name}`,
      unit,
      values: numbers(({ margins }) => margins[s] ?? Number.NaN),
    })),
    { name: "authority", unit: "share of the half-range", values: numbers(({ authority }) => authority) },
    { name: "radius", unit: "metric", values: numbers(({ radius }) => radius) },
    { name: "sigma", unit: "1/s", values: numbers(({ sigma }) => sigma) },
    { name: "provedRate", unit: "1/s", values: numbers(({ provedRate }) => provedRate) },
  ];
}
