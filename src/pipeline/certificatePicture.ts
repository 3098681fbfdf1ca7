/** What is drawn of a certificate, in the plant's units: rate map, violations, trade-off, footprint of the tube. */
import type { ControlAffineModel } from "../model/controlAffine.js";
import type { MarginGoal, Plant } from "../plant/plant.js";
import { plantScaling } from "../plant/scaling.js";
import type { CertificatePicture } from "../report/artifacts.js";
import { rateMap } from "../verify/rateMap.js";
import type { Certificate } from "./certificate.js";
import type { CertifiedTube } from "./certifyMetric.js";

const MOST_DRAWN = 60;

export function certificatePicture(
  name: string,
  plant: Plant,
  model: ControlAffineModel,
  { certification }: Certificate,
): CertificatePicture {
  const { survey, choice, tube } = certification;
  const { stateCenter } = plantScaling(plant);
  const map = rateMap(survey.condition);
  const axis = (position: number, values: readonly number[]) => {
    const state = model.active[position]!;
    const { name: label, unit } = plant.states[state]!;
    const toUnit = (z: number): number => stateCenter[state]! / unit.factor + z * halfRange(plant, state);
    return { name: label, unit: unit.name, values: values.map(toUnit) };
  };
  const goalHalf = halfRange(plant, goalState(plant, plant.settings.goal));
  const y = map === null ? null : map.y;
  return {
    name,
    rateMap:
      map === null ? null : { x: axis(map.x, map.xs), y: map.y === null ? null : axis(map.y, map.ys), rate: map.rate },
    violations:
      map === null
        ? []
        : survey.violations(tube?.claimedRate ?? 0, MOST_DRAWN).map(({ at, rate }) => ({
            x: axis(map.x, [at[map.x]!]).values[0]!,
            y: y === null ? null : axis(y, [at[y]!]).values[0]!,
            rate,
          })),
    tradeOff: choice.curve.map((point) => ({ ...point, margin: point.margin * goalHalf })),
    authorityLimit: plant.settings.authorityLimit,
    footprint: tube === null ? null : footprint(plant, tube),
  };
}

/** Half-range in the plant's unit of a state. */
export function halfRange(plant: Plant, state: number): number {
  return plantScaling(plant).stateHalf[state]! / plant.states[state]!.unit.factor;
}

/** The state whose unit a margin has: one of the position pair for a planar direction. */
export function goalState(plant: Plant, goal: MarginGoal): number {
  return goal.kind === "state" ? goal.state : plant.symmetry.rotation!.position[0];
}

/**
 * The ellipse that is drawn: half-widths along and across the heading are the tube's own claims there, so it is never
 * smaller than them; the tilt of W differs from state to state and is left out.
 */
function footprint(plant: Plant, tube: CertifiedTube): readonly [number, number, number] | null {
  const { rotation } = plant.symmetry;
  if (rotation === null) return null;
  const half = halfRange(plant, rotation.position[0]);
  const square = (kind: "along" | "across"): number =>
    tube.spreads.find(({ direction }) => direction.kind === kind)!.value * (tube.radius * half) ** 2;
  return [square("along"), 0, square("across")];
}
