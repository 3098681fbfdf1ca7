// Hundreds of thousands of arguments against 40-digit values; minutes.
import { describe, expect, it } from "vitest";
import { interval } from "../../src/num/interval.js";
import { seededRandom } from "../../src/num/random.js";
import { BINARY, big, FUNCTIONS, holds, thick } from "../num/intervalTruth.js";

const COUNT = 6000;

describe("enclosures hold the 40-digit truth (decimal.js), three points an interval", () => {
  for (const { name, enclose, truth, float, from, to } of FUNCTIONS) {
    it(name, () => {
      const random = seededRandom(17);
      let worst = 0;
      for (let i = 0; i < COUNT; i++) {
        const { lo, hi, inside } = thick(random, from, to);
        const image = enclose(interval(lo, hi));
        for (const x of [lo, inside, hi]) {
          const value = truth(big(x));
          expect(holds(image, value), `${name} at ${x} in [${lo}, ${hi}]`).toBe(true);
          const y = float(x);
          if (Number.isFinite(y) && Math.abs(y) > 1e-300)
            worst = Math.max(
              worst,
              value
                .minus(y)
                .abs()
                .div(2 ** -52 * Math.abs(y))
                .toNumber(),
            );
        }
      }
      // what intervalFunctions.ts widens by is at least four times this, in units of 2^-52 of the value
      expect(worst, "largest error of the engine's function").toBeLessThan(2);
    });
  }
  for (const { name, enclose, truth } of BINARY) {
    it(name, () => {
      const random = seededRandom(18);
      for (let i = 0; i < COUNT; i++) {
        const [a, b] = [thick(random, -1e150, 1e150), thick(random, -1e150, 1e150)];
        const image = enclose(interval(a.lo, a.hi), interval(b.lo, b.hi));
        for (const [x, y] of [
          [a.lo, b.lo],
          [a.hi, b.hi],
          [a.inside, b.inside],
        ] as const) {
          if (name === "divide" && y === 0) continue;
          expect(holds(image, truth(x, y)), `${name} of ${x} and ${y}`).toBe(true);
        }
      }
    });
  }
});
