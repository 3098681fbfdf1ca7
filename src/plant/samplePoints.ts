/** States at which compiled rates are checked: the grid of ends and middles of the envelope, then random points. */
import type { Random } from "../num/random.js";
import type { StateSpec } from "./plant.js";

const LARGEST_GRID = 3 ** 6;

/** Each n (SI). The grid 3^n is cut to the first 729 of its points in an order that starts at the centre. */
export function samplePoints(states: readonly StateSpec[], random: Random, randomCount: number): Float64Array[] {
  const n = states.length;
  const gridCount = Math.min(3 ** n, LARGEST_GRID);
  const grid = Array.from({ length: gridCount }, (_, code) =>
    Float64Array.from(states, ({ min, max }, i) => {
      const digit = Math.floor(code / 3 ** i) % 3;
      return digit === 0 ? (min + max) / 2 : digit === 1 ? min : max;
    }),
  );
  const scattered = Array.from({ length: randomCount }, () =>
    Float64Array.from(states, ({ min, max }) => min + (max - min) * random.uniform()),
  );
  return [...grid, ...scattered];
}
