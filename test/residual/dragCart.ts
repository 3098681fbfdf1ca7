// The cart with quadratic drag and a drive whose gain moves with the speed; both unknown to its plant file.
import { heldDraws } from "../../data/make/simulate.js";
import type { Run } from "../../src/logs/recording.js";
import { seededRandom } from "../../src/num/random.js";
import { cart, clamped, evenTimes, simulated } from "./invented.js";

export const dragCart = (steps: number) =>
  cart({
    unknown: "[{ rate: speed, from: [speed] }, { gain: accel, in: speed, from: [speed] }]",
    settings: `networks: { residual: { width: 10, steps: ${steps} } }`,
  });
export const drag = (speed: number): number => -0.15 * speed * Math.abs(speed);
export const gain = (speed: number): number => -0.3 + 0.1 * speed;

/** drags: how many times the drag. */
export function dragRuns(count: number, seed: number, noise: number, drags = 1): Run[] {
  return Array.from({ length: count }, (_, i) => {
    const random = seededRandom(seed).stream(`run ${i}`);
    const goal = heldDraws(random, [1, 4], () => -1.2 + 4.4 * random.uniform());
    const dither = heldDraws(random, [0.3, 1], () => 1.4 * random.uniform() - 0.7);
    return simulated(
      `run ${i}`,
      {
        rates: ([, s], [u]) => [s!, u! * (1 + gain(s!)) + drags * drag(s!)],
        law: (t, [, s]) => [clamped(2 * (goal(t) - s!) - drags * drag(s!) + dither(t), -1, 2)],
        start: [0, -1 + 4 * random.uniform()],
      },
      evenTimes(0.05, 15),
      () => noise * random.normal(),
    );
  });
}
