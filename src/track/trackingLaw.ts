/**
 * The tracking law: the input nearest to the plan's under which the path from x* to x contracts at the rate lambda,
 *   y(1)^T (f(x) + B(x) u) - y(0)^T (f(x*) + B(x*) u*) <= -lambda E,   y: momenta at the ends of the path (shortestPath.ts)
 * (Manchester and Slotine, "Control Contraction Metrics: Convex and Intrinsic Criteria for Nonlinear Feedback Design", IEEE
 * TAC 62(5), 2017, section III; least-norm choice, nearestInput.ts). It is 1/2 E' <= -lambda E, so d' <= -lambda d, on the
 * path's own E: safe for a path that is not the shortest, see shortestPath.ts. All in scaled states and inputs, the limits
 * of the inputs being [-1, 1]; the rate may differ from call to call. Rates include no disturbance.
 */
import { type ControlAffineModel, newModelPoint } from "../model/controlAffine.js";
import type { DualMetric } from "../nets/dualMetric.js";
import { type NearestInput, nearestInput } from "./nearestInput.js";
import { NO_DISTANCE, PATH_SETTINGS, type PathSettings, pathFinder, type ShortestPath } from "./shortestPath.js";
import { worldMetric } from "./worldMetric.js";

/** Of the last call; overwritten by the next. */
export interface TrackingStep {
  /** As in NearestInput; noMetric: W is not positive definite on the way, the plan's input is given. */
  status: NearestInput["status"] | "noMetric";
  /** m, scaled. */
  readonly u: Float64Array;
  /** How far 1/2 E' exceeds -lambda E with u, 1/s; 0 when the inequality is met. */
  shortfall: number;
  /** |D (u - u*)|: what tracking takes, in half-ranges. */
  effort: number;
  readonly path: ShortestPath;
}

export interface TrackingLaw {
  /** z, planned z* (n each), planned input u* (m), rate lambda (1/s, >= 0). Headings unwrapped. */
  step(z: Float64Array, plannedState: Float64Array, plannedInput: Float64Array, rate: number): TrackingStep;
  /** Forgets the path before: call between runs. */
  reset(): void;
}

export interface LawSettings {
  /** m, scaled half-ranges for the norm |D (u - u*)|, D = diag(1 / limit_j); by default 1: half of each input's range. */
  readonly limits?: Float64Array;
  readonly path?: PathSettings;
}

/** Owns its work space; a call allocates nothing of its own. Throws on limits that do not fit the model. */
export function trackingLaw(model: ControlAffineModel, metric: DualMetric, settings: LawSettings = {}): TrackingLaw {
  const { n, m, p } = model;
  const limits = settings.limits ?? new Float64Array(m).fill(1);
  if (limits.length !== m || limits.some((limit) => !(limit > 0 && Number.isFinite(limit)))) {
    throw new Error(`limits are [${limits.join(", ")}]; give ${m} positive numbers, one for each input`);
  }
  const finder = pathFinder(worldMetric(model, metric), settings.path ?? PATH_SETTINGS);
  const actual = newModelPoint(n, m, p);
  const planned = newModelPoint(n, m, p);
  const b = new Float64Array(m);
  const nearest: NearestInput = { status: "plan", shortfall: 0 };
  const path = finder.result;
  const result: TrackingStep = { status: "plan", u: new Float64Array(m), shortfall: 0, effort: 0, path };

  const step: TrackingLaw["step"] = (z, plannedState, plannedInput, rate) => {
    finder.find(plannedState, z);
    result.u.set(plannedInput);
    result.shortfall = 0;
    result.effort = 0;
    if (path.status === "notPositive") {
      result.status = "noMetric";
      return result;
    }
    let excess = 0;
    b.fill(0);
    if (path.energy > NO_DISTANCE) {
      model.evaluate(z, actual);
      model.evaluate(plannedState, planned);
      excess = rate * path.energy;
      for (let i = 0; i < n; i++) {
        const end = path.momentumEnd[i]!;
        const start = path.momentumStart[i]!;
        excess += end * actual.f[i]! - start * planned.f[i]!;
        for (let j = 0; j < m; j++) {
          const gain = end * actual.B[i * m + j]!;
          b[j]! += gain;
          excess += (gain - start * planned.B[i * m + j]!) * plannedInput[j]!;
        }
      }
    }
    nearestInput(excess, b, limits, plannedInput, result.u, nearest);
    result.status = nearest.status;
    result.shortfall = nearest.shortfall;
    let square = 0;
    for (let j = 0; j < m; j++) square += ((result.u[j]! - plannedInput[j]!) / limits[j]!) ** 2;
    result.effort = Math.sqrt(square);
    return result;
  };
  return { step, reset: finder.reset };
}
