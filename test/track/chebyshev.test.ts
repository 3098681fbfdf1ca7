import { describe, expect, it } from "vitest";
import { chebyshev } from "../../src/track/chebyshev.js";

describe("Chebyshev points", () => {
  it("has the closed-form Clenshaw-Curtis weights (Clenshaw and Curtis 1960; fractions recomputed by hand)", () => {
    const known: Record<number, number[]> = {
      2: [1 / 3, 4 / 3],
      3: [1 / 9, 8 / 9],
      4: [1 / 15, 8 / 15, 4 / 5],
      6: [1 / 35, 16 / 63, 16 / 35, 164 / 315],
    };
    for (const [degree, half] of Object.entries(known)) {
      const { weights } = chebyshev(Number(degree));
      for (let k = 0; k <= Number(degree); k++) {
        const mirrored = Math.min(k, Number(degree) - k);
        // half of the weight on [-1, 1]
        expect(weights[k]).toBeCloseTo(half[mirrored]! / 2, 15);
      }
    }
  });

  for (const degree of [2, 3, 4, 5, 8, 13]) {
    it(`integrates and differentiates powers up to degree ${degree} exactly`, () => {
      const { points, weights, derivative } = chebyshev(degree);
      const size = degree + 1;
      expect(points[0]).toBe(0);
      expect(points[degree]).toBe(1);
      for (let k = 0; k < size; k++) {
        expect(points[k]).toBeCloseTo((1 - Math.cos((k * Math.PI) / degree)) / 2, 15);
      }
      for (let power = 0; power <= degree; power++) {
        const values = points.map((s) => s ** power);
        expect(values.reduce((sum, v, k) => sum + weights[k]! * v, 0)).toBeCloseTo(1 / (power + 1), 14);
        for (let k = 0; k < size; k++) {
          const slope = values.reduce((sum, v, j) => sum + derivative[k * size + j]! * v, 0);
          const truth = power === 0 ? 0 : power * points[k]! ** (power - 1);
          expect(Math.abs(slope - truth)).toBeLessThan(1e-11);
        }
      }
    });
  }

  it("integrates one degree more when the degree is even, and no more", () => {
    const moment = (degree: number, power: number): number => {
      const { points, weights } = chebyshev(degree);
      return points.reduce((sum, s, k) => sum + weights[k]! * s ** power, 0) - 1 / (power + 1);
    };
    expect(Math.abs(moment(4, 5))).toBeLessThan(1e-15);
    expect(Math.abs(moment(4, 6))).toBeGreaterThan(1e-5);
  });

  it("refuses a degree that carries no bend", () => {
    expect(() => chebyshev(1)).toThrow(/degree of a path is 1/);
    expect(() => chebyshev(2.5)).toThrow(/2\.5/);
  });
});
