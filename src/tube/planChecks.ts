/**
 * What a plan must be before a tube can be laid along it: inside the envelope, its inputs inside their ranges, and a motion
 * of the fitted model.
 *
 * Jumps of the planned state (planSteps.ts) always enter the tube. Beyond a limit the plan is refused as well: a table with
 * a wrong unit or column would otherwise come back as a wide tube instead of an error, while a limit of zero would refuse
 * every table with rounded numbers. The limit is on what all jumps within any window add up to, as a share of what the
 * disturbance may push in that window.
 */
import type { Piece } from "../logs/recording.js";
import type { Plant, Unit } from "../plant/plant.js";
import { activeStates, plantScaling } from "../plant/scaling.js";
import type { PlanMotion } from "./planSteps.js";

export interface PlanProblem {
  readonly kind: "state" | "input" | "motion";
  /** State or input. */
  readonly name: string;
  readonly unit: string;
  /** Row of the plan's numbers, 1 is the first. */
  readonly row: number;
  /** s, as in the plan. */
  readonly time: number;
  /** In the unit: state or input there; motion: what it is beyond where the model arrives. */
  readonly value: number;
  /** In the unit; motion: null. */
  readonly allowed: readonly [number, number] | null;
  readonly text: string;
}

/** Share of the disturbance's push that the plan's own jumps may reach within a window. */
export const MOTION_LIMIT = 0.5;

/** The first sample of every active state and input that is outside its range. */
export function rangeProblems(plant: Plant, { time, states, inputs }: Piece): PlanProblem[] {
  const [n, m] = [plant.states.length, plant.inputs.length];
  const rows = Array.from(time.keys());
  const check = (
    kind: "state" | "input",
    { name, unit, min, max }: Plant["inputs"][number],
    at: (k: number) => number,
    last: number,
  ): PlanProblem[] => {
    const k = rows.find((row) => row < last && !(at(row) >= min && at(row) <= max));
    if (k === undefined) return [];
    const of = (value: number): number => value / unit.factor;
    const allowed = [of(min), of(max)] as const;
    const text =
      `${name} is ${shown(of(at(k)), unit)} at ${shown(time[k]!)} s (row ${k + 1}); ` +
      `the certificate covers ${shown(allowed[0])} to ${shown(allowed[1], unit)}`;
    return [{ kind, name, unit: unit.name, row: k + 1, time: time[k]!, value: of(at(k)), allowed, text }];
  };
  return [
    ...activeStates(plant).flatMap((i) => check("state", plant.states[i]!, (k) => states[k * n + i]!, time.length)),
    // the last row's inputs are held for no time
    ...plant.inputs.flatMap((input, j) => check("input", input, (k) => inputs[k * m + j]!, time.length - 1)),
  ];
}

/** The largest share of the disturbance's push that jumps reach within a window; a problem when it is over the limit. */
export function motionProblem(
  plant: Plant,
  { time }: Piece,
  { defects, jumps }: PlanMotion,
  window: number,
  sigma: number,
): { readonly share: number; readonly problem: PlanProblem | null } {
  let share = 0;
  let end = 0;
  let from = 0;
  let total = 0;
  for (let k = 1; k < time.length; k++) {
    total += jumps[k]!;
    while (time[k]! - time[from]! > window && from < k - 1) total -= jumps[++from]!;
    // a coarse plan has no two samples in a window: its one jump counts over its own step
    // without any disturbance there is nothing to hold jumps against
    const part = sigma > 0 ? total / (sigma * Math.max(window, time[k]! - time[from]!)) : 0;
    if (part > share) {
      share = part;
      end = k;
    }
  }
  if (share <= MOTION_LIMIT) return { share, problem: null };
  let k = end;
  while (k > 1 && time[end]! - time[k - 1]! < window) k--;
  let worst = k;
  for (; k <= end; k++) if (jumps[k]! > jumps[worst]!) worst = k;
  return { share, problem: motionText(plant, time, defects, worst, share) };
}

function motionText(plant: Plant, time: Float64Array, defects: Float64Array, k: number, share: number): PlanProblem {
  const n = plant.states.length;
  const { stateHalf } = plantScaling(plant);
  let state = 0;
  for (let i = 1; i < n; i++) if (Math.abs(defects[k * n + i]!) > Math.abs(defects[k * n + state]!)) state = i;
  const { name, unit } = plant.states[state]!;
  const value = (defects[k * n + state]! * stateHalf[state]!) / unit.factor;
  const text =
    `the plan is no motion of the fitted model: ${name} at ${shown(time[k]!)} s (row ${k + 1}) is ${shown(value, unit)} beyond where the ` +
    `model arrives from the row before with the inputs held; such jumps push up to ${shown(share)} times as hard as the ` +
    `disturbance bound, ${MOTION_LIMIT} is allowed. Plan on the fitted model, with inputs held from row to row, write all digits, and check units and columns`;
  return { kind: "motion", name, unit: unit.name, row: k + 1, time: time[k]!, value, allowed: null, text };
}

function shown(value: number, unit: Unit | null = null): string {
  const text = String(Number(value.toPrecision(6)));
  return unit === null || unit.name === "1" ? text : `${text} ${unit.name}`;
}
