/** Truth of the yard crane, an invented machine: a trolley with a hook on ropes, swaying in one plane. */
import { between, boxPoint, heldDraws, type Truth } from "./simulate.js";

export interface CraneHook {
  /** Suspension to centre of the load, m. */
  readonly rope: number;
  /** Linear (1/s) and quadratic (1/rad) sway damping. */
  readonly damping: readonly [number, number];
  /** Bounds of the drive error (m/s^2) and the wind push on the sway (rad/s^2). */
  readonly disturbance: readonly [number, number];
}

export const LIGHT_HOOK: CraneHook = { rope: 6.8, damping: [0.06, 0.2], disturbance: [0.006, 0.003] };
/** The hardware change: another hook block. The load hangs lower and sways against more drag. */
export const HEAVY_HOOK: CraneHook = { rope: 7.4, damping: [0.08, 0.28], disturbance: [0.006, 0.003] };

const GRAVITY = 9.80665;

export function yardCrane({ rope, damping, disturbance }: CraneHook): Truth {
  return {
    states: [
      { name: "trolley", unit: "m", noise: 0.001 },
      { name: "trolleySpeed", unit: "m/s", noise: 0.001 },
      { name: "sway", unit: "rad", noise: 0.0003 },
      { name: "swayRate", unit: "rad/s", noise: 0.0005 },
    ],
    inputs: [{ name: "accel", unit: "m/s^2", range: [-0.8, 0.8] }],
    disturbance,
    rates: ([, speed, sway, rate], [accel], [drive, wind]) => {
      const a = accel! + drive!;
      const pull = GRAVITY * Math.sin(sway!) + accel! * Math.cos(sway!);
      const drag = damping[0] * rate! + damping[1] * rate! * Math.hypot(rate!, 0.05);
      return [speed!, a, rate!, -pull / rope - drag + wind!];
    },
    start: (random) => {
      const [sway, rate] = boxPoint(
        random,
        [
          [-0.36, 0.36],
          [-0.31, 0.31],
        ],
        0.35,
      ) as [number, number];
      return [between(random, 8, 22), between(random, -0.8, 0.8), sway, rate];
    },
    excitation: (random) => {
      const pulse = heldDraws(random, [0.5, 2], () => between(random, -0.8, 0.8));
      // Kept near the middle of the runway, and out of the envelope's sway only by a little.
      return (time, [trolley, speed, sway, rate]) => {
        const isHigh = Math.hypot(sway! / 0.36, rate! / 0.36) > 1;
        const calming = isHigh ? 2 * rate! : 0;
        return [pulse(time) - 0.05 * (trolley! - 15) - 0.35 * speed! + calming];
      };
    },
  };
}
