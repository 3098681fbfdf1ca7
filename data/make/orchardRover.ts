/** Truth of the orchard rover, an invented vehicle: soil drag, and a turn gain that falls with speed. */
import { between, heldDraws, type Truth } from "./simulate.js";

export interface RoverSoil {
  readonly drag: (speed: number) => number;
  readonly turnGain: (speed: number) => number;
  /** Bounds of slip along and across (m/s), turn drift (rad/s), speed push (m/s^2). */
  readonly disturbance: readonly [number, number, number, number];
}

export const EMPTY_TANK: RoverSoil = {
  drag: (v) => 0.12 + 0.09 * v * v,
  turnGain: (v) => 1 / (1 + 0.12 * v * v),
  disturbance: [0.008, 0.008, 0.005, 0.015],
};
/** The hardware change: a full spray tank. Deeper tracks, a heavier tail. */
export const FULL_TANK: RoverSoil = {
  drag: (v) => 0.2 + 0.12 * v * v,
  turnGain: (v) => 0.97 / (1 + 0.14 * v * v),
  disturbance: [0.008, 0.009, 0.005, 0.015],
};

export function orchardRover(soil: RoverSoil): Truth {
  return {
    states: [
      { name: "px", unit: "m", noise: 0.001 },
      { name: "py", unit: "m", noise: 0.001 },
      { name: "heading", unit: "rad", noise: 0.0005, wraps: true },
      { name: "speed", unit: "m/s", noise: 0.002 },
    ],
    inputs: [
      { name: "drive", unit: "m/s^2", range: [-1.5, 1.5] },
      { name: "turn", unit: "rad/s", range: [-0.9, 0.9] },
    ],
    disturbance: soil.disturbance,
    rates: ([, , heading, speed], [drive, turn], [along, across, drift, push]) => {
      const [c, s, v] = [Math.cos(heading!), Math.sin(heading!), speed!];
      return [
        (v + along!) * c - across! * s,
        (v + along!) * s + across! * c,
        soil.turnGain(v) * turn! + drift!,
        drive! - soil.drag(v) + push!,
      ];
    },
    start: (random) => [
      between(random, -8, 8),
      between(random, -8, 8),
      between(random, -Math.PI, Math.PI),
      between(random, 0.6, 2.4),
    ],
    excitation: (random) => {
      const speedGoal = heldDraws(random, [2, 5], () => between(random, 0.55, 2.4));
      const turn = heldDraws(random, [0.6, 2], () => between(random, -0.9, 0.9));
      return (time, x) => [1.5 * (speedGoal(time) - x[3]!) + soil.drag(x[3]!), turn(time)];
    },
  };
}
