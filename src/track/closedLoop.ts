/**
 * The closed loop along a plan: z' = f(z) + B(z) u + G(z) w under the tracking law, beside the plan z*' = f(z*) + B(z*) u*,
 * both by classical Runge-Kutta with a fixed step (Kutta, Zeitschrift fuer Mathematik und Physik 46, 1901). With a sampled
 * law u is held over each step (and so is the plan's own input); otherwise the law acts at each of the four stages.
 */
import { type ControlAffineModel, newModelPoint } from "../model/controlAffine.js";
import type { TrackingLaw, TrackingStep } from "./trackingLaw.js";

export interface LoopPlan {
  /** n, scaled: z*(0). */
  readonly start: Float64Array;
  /** Scaled input u*(t) into u (m). */
  inputs(time: number, u: Float64Array): void;
  /** lambda(t), 1/s, that the law holds to. */
  rate(time: number): number;
}

export interface LoopSettings {
  /** n, scaled: z(0). */
  readonly start: Float64Array;
  /** s. */
  readonly step: number;
  readonly steps: number;
  readonly law: "sampled" | "continuous";
  /** w(t, z) into w (p), SI of each channel. */
  disturbance(time: number, z: Float64Array, w: Float64Array): void;
}

/** steps + 1 rows; the law's part of a row is that at the row's time, none for its own effect on the last. */
export interface LoopRun {
  /** s. */
  readonly time: Float64Array;
  /** n a row, scaled. */
  readonly states: Float64Array;
  readonly planned: Float64Array;
  /** m a row, scaled. */
  readonly inputs: Float64Array;
  readonly plannedInputs: Float64Array;
  /** sqrt(E): no less than the distance in the metric. */
  readonly distance: Float64Array;
  /** Largest |D (u - u*)|. */
  readonly largestEffort: number;
  readonly largestShortfall: number;
  /** Law evaluations (at stages too) by status, and those whose path did not converge. */
  readonly counts: Readonly<Record<TrackingStep["status"], number>>;
  readonly notConverged: number;
}

/** Throws on a step that is not positive or a number of steps that is not whole. */
export function closedLoop(
  model: ControlAffineModel,
  law: TrackingLaw,
  plan: LoopPlan,
  settings: LoopSettings,
): LoopRun {
  const { n, m, p } = model;
  const { step, steps } = settings;
  if (!(step > 0 && Number.isFinite(step)) || !Number.isInteger(steps) || steps < 0) {
    throw new Error(`step is ${step} s and steps ${steps}; give a positive step and a whole number of steps`);
  }
  const time = new Float64Array(steps + 1);
  const states = new Float64Array((steps + 1) * n);
  const planned = new Float64Array((steps + 1) * n);
  const inputs = new Float64Array((steps + 1) * m);
  const plannedInputs = new Float64Array((steps + 1) * m);
  const distance = new Float64Array(steps + 1);
  const counts: Record<TrackingStep["status"], number> = {
    plan: 0,
    corrected: 0,
    saturated: 0,
    short: 0,
    noControl: 0,
    noMetric: 0,
  };
  let notConverged = 0;
  let largestEffort = 0;
  let largestShortfall = 0;

  const point = newModelPoint(n, m, p);
  const u = new Float64Array(m);
  const uPlan = new Float64Array(m);
  const w = new Float64Array(p);
  const z = settings.start.slice();
  const zPlan = plan.start.slice();
  const [stage, stagePlan] = [new Float64Array(n), new Float64Array(n)];
  const [slope, slopePlan] = [new Float64Array(n), new Float64Array(n)];
  const [sum, sumPlan] = [new Float64Array(n), new Float64Array(n)];

  /** u* and u at (t, z, z*); returns the law's result. */
  const act = (t: number, at: Float64Array, atPlan: Float64Array): TrackingStep => {
    plan.inputs(t, uPlan);
    const result = law.step(at, atPlan, uPlan, plan.rate(t));
    u.set(result.u);
    counts[result.status]++;
    if (result.path.status !== "converged") notConverged++;
    largestEffort = Math.max(largestEffort, result.effort);
    largestShortfall = Math.max(largestShortfall, result.shortfall);
    return result;
  };
  const rates = (at: Float64Array, input: Float64Array, out: Float64Array): void => {
    model.evaluate(at, point);
    for (let i = 0; i < n; i++) {
      out[i] = point.f[i]!;
      for (let j = 0; j < m; j++) out[i]! += point.B[i * m + j]! * input[j]!;
    }
  };
  const disturb = (t: number, at: Float64Array, out: Float64Array): void => {
    settings.disturbance(t, at, w);
    for (let i = 0; i < n; i++) for (let c = 0; c < p; c++) out[i]! += point.G[i * p + c]! * w[c]!;
  };
  const record = (k: number): void => {
    const t = k * step;
    const result = act(t, z, zPlan);
    time[k] = t;
    states.set(z, k * n);
    planned.set(zPlan, k * n);
    inputs.set(u, k * m);
    plannedInputs.set(uPlan, k * m);
    distance[k] = result.status === "noMetric" ? Number.NaN : Math.sqrt(result.path.energy);
  };
  const advance = (t: number): void => {
    sum.fill(0);
    sumPlan.fill(0);
    stage.set(z);
    stagePlan.set(zPlan);
    for (let r = 0; r < 4; r++) {
      const share = r === 0 ? 0 : r === 3 ? 1 : 0.5;
      for (let i = 0; i < n; i++) {
        stage[i] = z[i]! + share * step * slope[i]!;
        stagePlan[i] = zPlan[i]! + share * step * slopePlan[i]!;
      }
      if (r > 0 && settings.law === "continuous") act(t + share * step, stage, stagePlan);
      rates(stagePlan, uPlan, slopePlan);
      rates(stage, u, slope);
      disturb(t + share * step, stage, slope);
      const weight = r === 0 || r === 3 ? 1 / 6 : 1 / 3;
      for (let i = 0; i < n; i++) {
        sum[i]! += weight * slope[i]!;
        sumPlan[i]! += weight * slopePlan[i]!;
      }
    }
    for (let i = 0; i < n; i++) {
      z[i]! += step * sum[i]!;
      zPlan[i]! += step * sumPlan[i]!;
    }
  };

  law.reset();
  for (let k = 0; k < steps; k++) {
    record(k);
    advance(k * step);
  }
  record(steps);
  return {
    time,
    states,
    planned,
    inputs,
    plannedInputs,
    distance,
    largestEffort,
    largestShortfall,
    counts,
    notConverged,
  };
}
