/** A tube along a plan in the plant's units and in words, beside the certificate's fixed tube. */
import type { Plant } from "../plant/plant.js";
import type { NamedUnit } from "../report/artifacts.js";
import type { PlanMargin, PlanPicture, PlanRow, PlanSummary, PlanValue } from "../report/planArtifacts.js";
import { marginOf } from "../tube/margins.js";
import type { PlanProblem } from "../tube/planChecks.js";
import type { PlanTube } from "../tube/planTube.js";
import { goalState, halfRange } from "./certificatePicture.js";
import type { CertifiedTube } from "./certifyMetric.js";
import type { PlanContext } from "./planContext.js";
import { assumptionsOf, endOf, fixedMisfit, lawWords, verdictWords } from "./planWords.js";

/** The margins of a tube, in its own order. */
export function marginNames(plant: Plant, { spreads }: CertifiedTube): (NamedUnit & { readonly half: number })[] {
  return spreads.map(({ direction }) => {
    const isState = direction.kind === "state";
    const state = isState ? direction.state : plant.symmetry.rotation!.position[0];
    const { name, unit } = plant.states[state]!;
    return { name: isState ? name : direction.kind, unit: unit.name, half: halfRange(plant, state) };
  });
}

/** Each row the worst of its steps. */
export function planRows({ plant, model, plan, motion, tube }: PlanContext, { steps }: PlanTube): PlanRow[] {
  const names = marginNames(plant, tube);
  const rows: PlanRow[] = [];
  const headingAt = tube.spreads.findIndex(
    ({ direction }) => direction.kind === "state" && direction.state === model.rotation?.heading,
  );
  for (const [k, { radius, sigma, authority, bounds }] of steps.entries()) {
    const headingError =
      model.rotation === null ? 0 : radius * Math.sqrt(bounds.spreads[headingAt]!) * model.rotation.headingHalf;
    const margins = names.map(({ half }, s) => {
      const { direction } = tube.spreads[s]!;
      const isCovered =
        (direction.kind !== "along" && direction.kind !== "across") ||
        direction.headingError >= Math.min(Math.PI / 2, headingError);
      return isCovered ? marginOf(radius, bounds.spreads[s]!, half) : null;
    });
    const sample = motion.sampleOf[k]!;
    const row = rows[sample];
    const [time, until] = [plan.time[sample]!, plan.time[sample + 1]!];
    const step: PlanRow = { time, until, radius, sigma, provedRate: bounds.rate, authority, margins };
    rows[sample] = row === undefined ? step : worse(row, step);
  }
  // a row that ends early holds for no whole row
  const isCut =
    steps.length < motion.steps.length && motion.sampleOf[steps.length] === motion.sampleOf[steps.length - 1];
  return isCut ? rows.slice(0, -1) : rows;
}

function worse(a: PlanRow, b: PlanRow): PlanRow {
  return {
    ...a,
    radius: Math.max(a.radius, b.radius),
    sigma: Math.max(a.sigma, b.sigma),
    provedRate: Math.min(a.provedRate, b.provedRate),
    authority: Math.max(a.authority, b.authority),
    margins: a.margins.map((value, s) => {
      const other = b.margins[s] ?? null;
      return value === null || other === null ? null : Math.max(value, other);
    }),
  };
}

export function planSummary(
  context: PlanContext,
  laid: PlanTube | null,
  rows: readonly PlanRow[],
  problems: readonly PlanProblem[],
  motionShare: number,
): PlanSummary {
  const { plant, plan, tube, fixedHolds, rate, window, cells } = context;
  const goal = goalName(plant);
  const names = marginNames(plant, tube);
  const along = (fixed: number, at: (row: PlanRow) => number | null): PlanValue => ({
    fixed: fixedHolds ? fixed : null,
    ...overTime(rows, at),
  });
  const margins = names.map(
    ({ name, unit, half }, s): PlanMargin => ({
      name,
      unit,
      ...along(marginOf(tube.radius, tube.spreads[s]!.value, half), ({ margins: of }) => of[s] ?? null),
    }),
  );
  const end = laid?.end == null ? null : endOf(context, laid.end);
  const asked = margins.find(({ name }) => name === goal)!;
  const status = laid === null ? "refused" : end === null ? "whole" : "ends";
  return {
    plant: plant.name,
    description: plant.description,
    plan: { file: plan.file, samples: plan.time.length, from: plan.time[0]!, until: plan.time.at(-1)! },
    status,
    text: verdictWords(status, problems, end, asked),
    problems,
    end,
    fixedHolds,
    fixedMisfit: laid === null || !fixedHolds ? null : fixedMisfit(context, margins),
    law: lawWords(rate, tube.rate),
    rate,
    fixedRate: tube.rate,
    window,
    evidence: "proved",
    motionShare,
    goal,
    margins,
    authority: { ...along(tube.authority, ({ authority }) => authority), limit: plant.settings.authorityLimit },
    radius: along(tube.radius, ({ radius }) => radius),
    cells: cells.count,
    assumptions: assumptionsOf(plant, window),
  };
}

function goalName({ settings: { goal }, states }: Plant): string {
  return goal.kind === "state" ? states[goal.state]!.name : goal.kind;
}

function overTime(rows: readonly PlanRow[], at: (row: PlanRow) => number | null): Omit<PlanValue, "fixed"> {
  let [largest, total, time] = [0, 0, 0];
  for (const row of rows) {
    const value = at(row);
    if (value === null) continue;
    const length = row.until - row.time;
    largest = Math.max(largest, value);
    total += length * value;
    time += length;
  }
  return time === 0 ? { largest: null, mean: null } : { largest, mean: total / time };
}

export function planPicture({ plant, plan, tube, fixedHolds }: PlanContext, rows: readonly PlanRow[]): PlanPicture {
  const n = plant.states.length;
  const { rotation } = plant.symmetry;
  const samples = rows.length === 0 ? [] : Array.from({ length: rows.length + 1 }, (_value, k) => k);
  const value = (k: number, state: number): number => plan.states[k * n + state]! / plant.states[state]!.unit.factor;
  const state = goalState(plant, plant.settings.goal);
  return {
    rows,
    fixedSigma: fixedHolds ? tube.sigma : null,
    path:
      rotation === null
        ? null
        : {
            unit: plant.states[rotation.position[0]]!.unit.name,
            points: samples.map((k) => ({
              x: value(k, rotation.position[0]),
              y: value(k, rotation.position[1]),
              heading: plan.states[k * n + rotation.heading]!,
            })),
          },
    planned: rotation === null ? samples.map((k) => value(k, state)) : null,
  };
}
