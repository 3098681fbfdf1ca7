/** A tube along a plan in the plant's units and in words, beside the certificate's fixed tube. */
import type { Plan } from "../logs/readPlan.js";
import type { ControlAffineModel } from "../model/controlAffine.js";
import type { Plant } from "../plant/plant.js";
import { activeStates, plantScaling } from "../plant/scaling.js";
import type { NamedUnit } from "../report/artifacts.js";
import type { PlanMargin, PlanPicture, PlanRow, PlanSummary, PlanValue } from "../report/planArtifacts.js";
import { marginOf, shrunk } from "../tube/margins.js";
import type { PlanProblem } from "../tube/planChecks.js";
import type { PlanMotion } from "../tube/planSteps.js";
import type { PlanTube, PlanTubeEnd } from "../tube/planTube.js";
import { goalState, halfRange } from "./certificatePicture.js";
import type { CertifiedTube } from "./certifyMetric.js";
import type { PlanCells } from "./planCells.js";
import { quantityIn } from "./quantityWords.js";

export interface PlanContext {
  readonly plant: Plant;
  readonly model: ControlAffineModel;
  readonly plan: Plan;
  readonly motion: PlanMotion;
  readonly tube: CertifiedTube;
  readonly window: number;
  readonly cells: PlanCells;
}

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
  const { plant, plan, tube, window, cells } = context;
  const goal = goalName(plant);
  const names = marginNames(plant, tube);
  const along = (fixed: number, at: (row: PlanRow) => number | null): PlanValue => ({ fixed, ...overTime(rows, at) });
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
    fixedMisfit: laid === null ? null : fixedMisfit(context, margins),
    law: `least-norm tracking law at the fixed tube's contraction rate of ${shown(tube.rate)} 1/s, all along the plan`,
    rate: tube.rate,
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

function verdictWords(
  status: PlanSummary["status"],
  problems: readonly PlanProblem[],
  end: PlanSummary["end"],
  { name, unit, fixed, largest, mean }: PlanMargin,
): string {
  if (status === "refused") return `The plan is refused: ${problems.map(({ text }) => text).join("; ")}.`;
  const until = end === null ? "" : ` From ${shown(end.time)} s on there is no number: ${end.text}.`;
  if (largest === null || mean === null) return `No number for this plan.${until}`;
  const range = end === null ? "all along the plan" : `up to ${shown(end.time)} s`;
  return `The margin '${name}' is at most ${shown(largest)} ${unit} ${range}, ${shown(mean)} ${unit} on average; the fixed tube's is ${shown(fixed)} ${unit}.${until}`;
}

function endOf({ plant, plan, motion, cells }: PlanContext, end: PlanTubeEnd): NonNullable<PlanSummary["end"]> {
  const sample = motion.sampleOf[end.step]!;
  return { time: plan.time[sample]!, kind: end.kind, text: endWords(plant, motion, cells, end) };
}

function endWords(plant: Plant, motion: PlanMotion, cells: PlanCells, end: PlanTubeEnd): string {
  const { stateCenter, stateHalf, inputCenter, inputHalf } = plantScaling(plant);
  const active = activeStates(plant);
  const step = motion.steps[end.step]!;
  if (end.kind === "input") {
    const input = plant.inputs[end.index]!;
    const planned = inputCenter[end.index]! + inputHalf[end.index]! * step.inputs[end.index]!;
    return (
      `${quantityIn(input, planned)} is planned and tracking may need ${shown(100 * end.authority)} % of its half-range on top; ` +
      `together they leave the range up to ${quantityIn(input, planned < inputCenter[end.index]! ? input.min : input.max)}`
    );
  }
  const spanOf = (i: number): string => {
    const state = active[i]!;
    const at = (z: number): string =>
      shown((stateCenter[state]! + stateHalf[state]! * z) / plant.states[state]!.unit.factor);
    return `${plant.states[state]!.name} ${at(end.lower[i]!)} to ${at(end.upper[i]!)} ${plant.states[state]!.unit.name}`;
  };
  if (end.kind === "envelope") {
    const { name, unit, min, max } = plant.states[active[end.index]!]!;
    return `the tube reaches ${spanOf(end.index)}; the certificate covers ${name} ${shown(min / unit.factor)} to ${shown(max / unit.factor)} ${unit.name}`;
  }
  const leaf = cells.unproved(end.lower, end.upper);
  const why = leaf === null ? "not proved" : `${leaf.status} (claim '${leaf.claim}')`;
  return `the tube touches a part of the envelope that is ${why}, within ${active.map((_, i) => spanOf(i)).join(", ")}`;
}

/** The design's rule for plans under the fixed tube: the envelope less its margins, the inputs less its authority. */
function fixedMisfit({ plant, plan, tube }: PlanContext, margins: readonly PlanMargin[]): string | null {
  const check = (
    quantity: Plant["inputs"][number],
    margin: number,
    at: (k: number) => number,
    count: number,
  ): string | null => {
    const part = shrunk({ low: quantity.min, high: quantity.max }, margin);
    if (part === null) return `the fixed margin of ${quantity.name} leaves no room for plans`;
    for (let k = 0; k < count; k++) {
      if (at(k) < part.low || at(k) > part.high)
        return `${quantityIn(quantity, at(k))} at ${plan.time[k]} s; the fixed tube leaves ${shown(part.low / quantity.unit.factor)} to ${shown(part.high / quantity.unit.factor)} ${quantity.unit.name}`;
    }
    return null;
  };
  const [n, m] = [plant.states.length, plant.inputs.length];
  const { inputHalf } = plantScaling(plant);
  for (const i of activeStates(plant)) {
    const state = plant.states[i]!;
    const { fixed } = margins.find(({ name }) => name === state.name)!;
    const text = check(state, fixed * state.unit.factor, (k) => plan.states[k * n + i]!, plan.time.length);
    if (text !== null) return text;
  }
  for (const [j, input] of plant.inputs.entries()) {
    const text = check(input, tube.authority * inputHalf[j]!, (k) => plan.inputs[k * m + j]!, plan.time.length - 1);
    if (text !== null) return text;
  }
  return null;
}

export function planPicture({ plant, plan, window: _, tube }: PlanContext, rows: readonly PlanRow[]): PlanPicture {
  const n = plant.states.length;
  const { rotation } = plant.symmetry;
  const samples = rows.length === 0 ? [] : Array.from({ length: rows.length + 1 }, (_value, k) => k);
  const value = (k: number, state: number): number => plan.states[k * n + state]! / plant.states[state]!.unit.factor;
  const state = goalState(plant, plant.settings.goal);
  return {
    rows,
    fixedSigma: tube.sigma,
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

function assumptionsOf(plant: Plant, window: number): string[] {
  return [
    "Law: continuous, exact state feedback by the least-norm tracking law; sampling, lag and estimate errors come on top.",
    `Disturbance: its mean over any ${window} s stays under the bound, each channel keeps its sign within a window; within a window each channel may push at its own worst time.`,
    "Between two samples the planned state moves as the fitted model does under the held inputs; where it arrives beside the next sample it jumps there, and the jump's length in the metric is added to the radius.",
    "Proved: every bound on push, width and authority, over every cell that the tube can touch, given the disturbance bound and the fitted model. The plan itself is integrated in float64, its bend within a step estimated eightfold.",
    `The tube starts within a distance of ${plant.settings.initialDistance} (metric units) of the plan.`,
  ];
}

function shown(value: number): string {
  return String(Number(value.toPrecision(3)));
}
