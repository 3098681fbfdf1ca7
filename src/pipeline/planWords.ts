/** What a tube along a plan says in words: the outcome, where it ends and why, what it rests on. */
import type { Plant } from "../plant/plant.js";
import { activeStates, plantScaling } from "../plant/scaling.js";
import { quantity, range, share } from "../report/format.js";
import type { PlanMargin, PlanSummary } from "../report/planArtifacts.js";
import { shrunk } from "../tube/margins.js";
import type { PlanProblem } from "../tube/planChecks.js";
import type { PlanTubeEnd } from "../tube/planTube.js";
import type { PlanContext } from "./planContext.js";

export function verdictWords(
  status: PlanSummary["status"],
  problems: readonly PlanProblem[],
  end: PlanSummary["end"],
  { name, unit, fixed, largest, mean }: PlanMargin,
): string {
  if (status === "refused") return `The plan is refused: ${problems.map(({ text }) => text).join("; ")}.`;
  const until = end === null ? "" : ` From ${seconds(end.time)} on there is no number: ${end.text}.`;
  if (largest === null || mean === null) return `No number for this plan.${until}`;
  const span = end === null ? "all along the plan" : `up to ${seconds(end.time)}`;
  const [most, usual] = [largest, mean].map((value) => quantity(value, unit, "up"));
  const beside =
    fixed === null
      ? "the certificate fails elsewhere and gives no fixed margin"
      : `the fixed tube's is ${quantity(fixed, unit, "up")}`;
  return `The margin '${name}' is at most ${most} ${span}, ${usual} on average; ${beside}.${until}`;
}

export function lawWords(rate: number, fixedRate: number): string {
  const law = `least-norm tracking law at a contraction rate of ${quantity(rate, "1/s", "down")} all along the plan`;
  return rate === fixedRate
    ? `${law}, as for the fixed tube`
    : `${law}, a rate of this plan's own: the fixed tube's is ${quantity(fixedRate, "1/s", "down")}, and the vehicle must be told to track faster`;
}

export function endOf(context: PlanContext, end: PlanTubeEnd): NonNullable<PlanSummary["end"]> {
  const { plan, motion } = context;
  return { time: plan.time[motion.sampleOf[end.step]!]!, kind: end.kind, text: END_WORDS[end.kind](context, end) };
}

const END_WORDS: Readonly<Record<PlanTubeEnd["kind"], (context: PlanContext, end: PlanTubeEnd) => string>> = {
  input: ({ plant, motion }, { step, index, authority }) => {
    const { inputCenter, inputHalf } = plantScaling(plant);
    const { name, unit, min, max } = plant.inputs[index]!;
    const planned = inputCenter[index]! + inputHalf[index]! * motion.steps[step]!.inputs[index]!;
    return (
      `${name} ${quantity(planned / unit.factor, unit.name)} is planned and tracking may need ${share(authority, "up")} of its half-range; ` +
      `together they leave its range, ${range([min / unit.factor, max / unit.factor], unit.name, ["near", "near"])}`
    );
  },
  envelope: ({ plant }, { index, lower, upper }) => {
    const { name, unit, min, max } = plant.states[activeStates(plant)[index]!]!;
    const covered = range([min / unit.factor, max / unit.factor], unit.name, ["near", "near"]);
    return `the tube reaches ${reach(plant, index, lower, upper)}; the certificate covers ${name} ${covered}`;
  },
  cells: ({ plant, cells }, { lower, upper }) => {
    const leaf = cells.unproved(lower, upper);
    const why = leaf === null ? "not proved" : `${leaf.status} (claim '${leaf.claim}')`;
    const where = activeStates(plant).map((_, i) => reach(plant, i, lower, upper));
    return `the tube touches a part of the envelope that is ${why}, within ${where.join(", ")}`;
  },
};

/** Span of an active coordinate, rounded outwards. */
function reach(plant: Plant, index: number, lower: Float64Array, upper: Float64Array): string {
  const { stateCenter, stateHalf } = plantScaling(plant);
  const state = activeStates(plant)[index]!;
  const { name, unit } = plant.states[state]!;
  const at = (z: number): number => (stateCenter[state]! + stateHalf[state]! * z) / unit.factor;
  return `${name} ${range([at(lower[index]!), at(upper[index]!)], unit.name, ["down", "up"])}`;
}

/** The design's rule for plans under the fixed tube: the envelope less its margins, the inputs less its authority. */
export function fixedMisfit({ plant, plan, tube }: PlanContext, margins: readonly PlanMargin[]): string | null {
  const check = (
    of: Plant["inputs"][number],
    margin: number,
    at: (k: number) => number,
    count: number,
  ): string | null => {
    const part = shrunk({ low: of.min, high: of.max }, margin);
    if (part === null) return `the fixed margin of ${of.name} leaves no room for plans`;
    for (let k = 0; k < count; k++) {
      if (at(k) >= part.low && at(k) <= part.high) continue;
      const { factor, name } = of.unit;
      const left = range([part.low / factor, part.high / factor], name, ["up", "down"]);
      return `${of.name} is ${quantity(at(k) / factor, name)} at ${seconds(plan.time[k]!)}; the fixed tube leaves ${left}`;
    }
    return null;
  };
  const [n, m] = [plant.states.length, plant.inputs.length];
  const { inputHalf } = plantScaling(plant);
  for (const i of activeStates(plant)) {
    const state = plant.states[i]!;
    const fixed = margins.find(({ name }) => name === state.name)!.fixed! * state.unit.factor;
    const text = check(state, fixed, (k) => plan.states[k * n + i]!, plan.time.length);
    if (text !== null) return text;
  }
  for (const [j, input] of plant.inputs.entries()) {
    const text = check(input, tube.authority * inputHalf[j]!, (k) => plan.inputs[k * m + j]!, plan.time.length - 1);
    if (text !== null) return text;
  }
  return null;
}

export function assumptionsOf(plant: Plant, window: number): string[] {
  return [
    "Law: continuous, exact state feedback by the least-norm tracking law; sampling, lag and estimate errors come on top.",
    `Disturbance: its mean over any ${window} s stays under the bound, each channel keeps its sign within a window; within a window each channel may push at its own worst time.`,
    "Between two samples the planned state moves as the fitted model does under the held inputs; where it arrives beside the next sample it jumps there, and the jump's length in the metric is added to the radius.",
    "Proved: every bound on push, width and authority, over every cell that the tube can touch, given the disturbance bound and the fitted model. The plan itself is integrated in float64, its bend within a step estimated eightfold.",
    `The tube starts within a distance of ${plant.settings.initialDistance} (metric units) of the plan.`,
  ];
}

/** In full: a time up to which a number holds is not rounded. */
function seconds(time: number): string {
  return `${Number(time.toPrecision(9))} s`;
}
