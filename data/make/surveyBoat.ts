/** Truth of the survey boat, an invented vessel: manoeuvring rates of the usual textbook form, sway not actuated. */
import { sobolPoints } from "../../src/num/sobol.js";
import { between, heldDraws, type Truth } from "./simulate.js";

export interface BoatHull {
  /** Quadratic surge drag (1/m) and the surge rate from sway times yaw rate (1). */
  readonly surge: readonly [number, number];
  /** Cross-flow sway drag (1/m) and the sway rate from surge times yaw rate (1), beyond the prior's. */
  readonly sway: readonly [number, number];
  /** Quadratic yaw drag (1/rad) and the yaw rate from surge times sway (rad/m^2). */
  readonly yaw: readonly [number, number];
  /** Bounds of the pushes on surge and sway (m/s^2) and yaw (rad/s^2). */
  readonly disturbance: readonly [number, number, number];
}

export const BARE_HULL: BoatHull = {
  surge: [0.16, 0.8],
  sway: [1.1, 0.25],
  yaw: [0.9, 0.35],
  disturbance: [0.004, 0.003, 0.003],
};
/** The hardware change: a sensor pod under the keel. More drag, and the couplings move. */
export const WITH_POD: BoatHull = {
  surge: [0.19, 0.86],
  sway: [1.3, 0.29],
  yaw: [1.02, 0.39],
  disturbance: [0.004, 0.003, 0.003],
};

/** Low end and width of the first surge, sway (m/s) and yaw rate (rad/s). */
const START_BOX = [
  [0.52, 1.56],
  [-0.34, 0.68],
  [-0.4, 0.8],
] as const;
const [MASS, INERTIA] = [120, 50];
const NOISE = { position: 0.0008, heading: 0.0003, speed: 0.0005, yawRate: 0.0003 };

export function surveyBoat(hull: BoatHull): Truth {
  const crossFlow = (v: number): number => v * Math.hypot(v, 0.05);
  return {
    states: [
      { name: "px", unit: "m", noise: NOISE.position },
      { name: "py", unit: "m", noise: NOISE.position },
      { name: "heading", unit: "rad", noise: NOISE.heading, wraps: true },
      { name: "surge", unit: "m/s", noise: NOISE.speed },
      { name: "sway", unit: "m/s", noise: NOISE.speed },
      { name: "yawRate", unit: "rad/s", noise: NOISE.yawRate },
    ],
    inputs: [
      { name: "push", unit: "N", range: [-40, 160] },
      { name: "yawMoment", unit: "N m", range: [-60, 60] },
    ],
    disturbance: hull.disturbance,
    rates: ([, , heading, u, v, r], [push, moment], [onSurge, onSway, onYaw]) => {
      const [c, s] = [Math.cos(heading!), Math.sin(heading!)];
      return [
        u! * c - v! * s,
        u! * s + v! * c,
        r!,
        push! / MASS - 0.12 * u! - hull.surge[0] * u! * u! + hull.surge[1] * v! * r! + onSurge!,
        -0.7 * v! - 0.5 * u! * r! - hull.sway[0] * crossFlow(v!) - hull.sway[1] * u! * r! + onSway!,
        moment! / INERTIA - 0.8 * r! - hull.yaw[0] * crossFlow(r!) - hull.yaw[1] * u! * v! + onYaw!,
      ];
    },
    start: (random, run) => {
      // low-discrepancy over a box a fifth larger than the envelope: sway is not actuated, so its corners must be started in
      const [u, v, r] = sobolPoints(3, 1, run + 1).map((part, i) => START_BOX[i]![0] + part * START_BOX[i]![1]);
      return [between(random, -15, 15), between(random, -15, 15), between(random, -Math.PI, Math.PI), u!, v!, r!];
    },
    excitation: (random) => {
      const surgeGoal = heldDraws(random, [2, 4], () => between(random, 0.6, 2));
      const yawGoal = heldDraws(random, [1, 2.5], () => between(random, -0.4, 0.4));
      return (time, [, , , u, v, r]) => {
        const balance = 0.12 * u! + hull.surge[0] * u! * u! - hull.surge[1] * v! * r!;
        return [
          MASS * (balance + 0.8 * (surgeGoal(time) - u!)),
          INERTIA * (0.8 * r! + hull.yaw[1] * u! * v! + 2 * (yawGoal(time) - r!)),
        ];
      };
    },
  };
}
