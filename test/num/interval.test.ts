import { describe, expect, it } from "vitest";
import { addUp, ETA, multiplyUp, sqrtUp, stepDown, stepUp } from "../../src/num/directed.js";
import { ENTIRE, interval, multiplyIntervals, signInterval, squareInterval } from "../../src/num/interval.js";
import {
  atan2Interval,
  cosInterval,
  logInterval,
  powerInterval,
  sinInterval,
  tanInterval,
} from "../../src/num/intervalFunctions.js";
import { seededRandom } from "../../src/num/random.js";
import { argument, BINARY, big, FUNCTIONS, holds, thick } from "./intervalTruth.js";

/** Per function here; test/soak/interval.test.ts goes through 20,000 a function. */
const COUNT = 400;

describe("directed steps", () => {
  it("steps to the next float64 or the one after", () => {
    const bits = new BigInt64Array(1);
    const value = new Float64Array(bits.buffer);
    const random = seededRandom(1);
    for (let i = 0; i < 20_000; i++) {
      value[0] = Math.abs(argument(random, -1e300, 1e300)) + 1e-300;
      const x = value[0]!;
      bits[0]! += 1n;
      const next = value[0]!;
      bits[0]! += 1n;
      expect([next, value[0]]).toContain(stepUp(x));
      expect(stepDown(-x)).toBe(-stepUp(x));
    }
    expect(stepUp(0)).toBe(ETA);
    expect(stepUp(Number.NEGATIVE_INFINITY)).toBe(-Number.MAX_VALUE);
    expect(stepUp(Number.POSITIVE_INFINITY)).toBe(Number.POSITIVE_INFINITY);
  });
  it("keeps exact results", () => {
    expect(addUp(0.5, 0.25)).toBe(0.75);
    expect(addUp(0.1, 0.2)).toBeGreaterThanOrEqual(0.1 + 0.2);
    expect(multiplyUp(0, Number.POSITIVE_INFINITY)).toBe(0);
    expect(sqrtUp(49)).toBe(7);
    expect(sqrtUp(2)).toBeGreaterThan(Math.SQRT2);
  });
});

describe("enclosures hold the 40-digit truth (decimal.js)", () => {
  for (const { name, enclose, truth, from, to } of FUNCTIONS) {
    it(name, () => {
      const random = seededRandom(7);
      for (let i = 0; i < COUNT; i++) {
        const { lo, hi, inside } = thick(random, from, to);
        const image = enclose(interval(lo, hi));
        for (const x of [lo, inside, hi])
          expect(holds(image, truth(big(x))), `${name} at ${x} in [${lo}, ${hi}]`).toBe(true);
      }
    });
  }
  for (const { name, enclose, truth } of BINARY) {
    it(name, () => {
      const random = seededRandom(8);
      for (let i = 0; i < COUNT; i++) {
        const [a, b] = [thick(random, -1e150, 1e150), thick(random, -1e150, 1e150)];
        const image = enclose(interval(a.lo, a.hi), interval(b.lo, b.hi));
        for (const [x, y] of [
          [a.lo, b.lo],
          [a.hi, b.lo],
          [a.inside, b.inside],
        ] as const) {
          if (name === "divide" && y === 0) continue;
          expect(holds(image, truth(x, y)), `${name} of ${x} and ${y}`).toBe(true);
        }
      }
    });
  }
});

describe("tightness", () => {
  it("widens a point by no more than 40 units in the last place", () => {
    const random = seededRandom(9);
    for (const { name, enclose, float, from, to } of FUNCTIONS) {
      for (let i = 0; i < 2000; i++) {
        const x = argument(random, from, to);
        const { lo, hi } = enclose(interval(x));
        const y = float(x);
        if (!Number.isFinite(hi - lo) || Math.abs(y) < 1e-290) continue;
        expect((hi - lo) / Math.abs(y), `${name} at ${x}`).toBeLessThan(40 * 2 ** -52);
      }
    }
  });
});

describe("shapes", () => {
  it("finds the extremes of waves inside an interval", () => {
    expect(sinInterval(interval(1, 2)).hi).toBe(1);
    expect(cosInterval(interval(-0.1, 0.1)).hi).toBe(1);
    expect(cosInterval(interval(3, 3.2)).lo).toBe(-1);
    expect(sinInterval(interval(0, 7))).toEqual({ lo: -1, hi: 1 });
    expect(sinInterval(interval(0.1, 0.2)).hi).toBeLessThan(0.2);
    expect(sinInterval(interval(1e9, 1e9))).toEqual({ lo: -1, hi: 1 });
  });
  it("claims nothing where a function is not defined", () => {
    expect(tanInterval(interval(1.5, 1.6))).toEqual(ENTIRE);
    expect(logInterval(interval(0, 1))).toEqual(ENTIRE);
    expect(powerInterval(interval(-1, 1), 0.5)).toEqual(ENTIRE);
    expect(powerInterval(interval(-1, 1), -2)).toEqual(ENTIRE);
    expect(interval(Number.NaN, 1)).toEqual(ENTIRE);
  });
  it("covers all angles around the origin and across the cut", () => {
    for (const x of [interval(-1, 1), interval(-2, -1)]) {
      const all = atan2Interval(interval(-1, 1), x);
      expect(all.lo).toBeLessThanOrEqual(-Math.PI);
      expect(all.hi).toBeGreaterThanOrEqual(Math.PI);
    }
  });
  it("knows even powers, squares and signs", () => {
    expect(squareInterval(interval(-2, 1))).toEqual({ lo: 0, hi: expect.closeTo(4, 12) });
    expect(powerInterval(interval(-2, 1), 2).lo).toBe(0);
    expect(multiplyIntervals(interval(-2, 1), interval(-2, 1)).lo).toBeLessThan(0);
    expect(signInterval(interval(-1, 1))).toEqual({ lo: -1, hi: 1 });
    expect(signInterval(interval(0.5, 1))).toEqual({ lo: 1, hi: 1 });
  });
  it("refuses swapped ends", () => {
    expect(() => interval(2, 1)).toThrow(/lower end/);
  });
});
