/** What the results and words of a tube along a plan are made from. */
import type { Plan } from "../logs/readPlan.js";
import type { ControlAffineModel } from "../model/controlAffine.js";
import type { Plant } from "../plant/plant.js";
import type { PlanMotion } from "../tube/planSteps.js";
import type { CertifiedTube } from "./certifyMetric.js";
import type { PlanCells } from "./planCells.js";

export interface PlanContext {
  readonly plant: Plant;
  readonly model: ControlAffineModel;
  readonly plan: Plan;
  readonly motion: PlanMotion;
  readonly tube: CertifiedTube;
  /** Whether the fixed tube holds all over the envelope. */
  readonly fixedHolds: boolean;
  /** The law's, 1/s: the tube's own or one for this plan. */
  readonly rate: number;
  readonly window: number;
  readonly cells: PlanCells;
}
