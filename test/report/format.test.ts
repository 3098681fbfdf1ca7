import fc from "fast-check";
import { describe, expect, it } from "vitest";
import { duration, niceStep, number, quantity, range, share } from "../../src/report/format.js";

describe("numbers for people", () => {
  it.each([
    [0, "near", "0"],
    [0.33, "up", "0.33"],
    [0.33, "down", "0.33"],
    [0.14321, "up", "0.144"],
    [0.14321, "near", "0.143"],
    [-0.184213, "down", "-0.185"],
    [-0.184213, "up", "-0.184"],
    [9.999, "up", "10"],
    [9.999, "down", "9.99"],
    [1234.6, "near", "1230"],
    [3.4533e-5, "up", "3.46e-5"],
    [2.5e7, "near", "2.5e7"],
    [Number.POSITIVE_INFINITY, "up", "unlimited"],
  ] as const)("%d rounded %s is %s", (value, rounding, text) => {
    expect(number(value, rounding)).toBe(text);
  });

  it("never rounds to the better side, and by less than 1 %", () => {
    const values = fc.double({ min: 1e-9, max: 1e9, noNaN: true }).chain((size) => fc.constantFrom(size, -size));
    fc.assert(
      fc.property(values, (value) => {
        const slack = 2e-12 * Math.abs(value);
        const [up, down] = [Number(number(value, "up")), Number(number(value, "down"))];
        expect(up).toBeGreaterThanOrEqual(value - slack);
        expect(down).toBeLessThanOrEqual(value + slack);
        expect(Math.abs(up - value)).toBeLessThan(0.0101 * Math.abs(value));
        expect(Math.abs(down - value)).toBeLessThan(0.0101 * Math.abs(value));
      }),
      { seed: 7 },
    );
  });

  it("writes units, shares, ranges and times", () => {
    expect(quantity(0.5, "m/s")).toBe("0.5 m/s");
    expect(quantity(0.5, "1")).toBe("0.5");
    expect(share(0.99996)).toBe("99.9 %");
    expect(share(1)).toBe("100 %");
    expect(share(3.4533e-4, "up")).toBe("0.0346 %");
    expect(range([0.7209, 2.2791], "m/s", ["up", "down"])).toBe("0.721 to 2.27 m/s");
    expect(duration(14.23)).toBe("14.2 s");
    expect(duration(150.4)).toBe("2 min 30 s");
  });

  it("finds the next of 1, 2, 5", () => {
    expect([0.9, 1, 1.01, 2, 3, 5, 7, 0.0021].map(niceStep)).toEqual([1, 1, 2, 2, 5, 5, 10, 0.005]);
  });
});
