import { expect, it } from "vitest";
import { sobolPoints } from "../../src/num/sobol.js";

// Joe and Kuo 2008, D6, Gray-code order; computed with a reference library.
const FIRST = [
  [0, 0, 0],
  [0.5, 0.5, 0.5],
  [0.75, 0.25, 0.25],
  [0.25, 0.75, 0.75],
  [0.375, 0.375, 0.625],
  [0.875, 0.875, 0.125],
  [0.625, 0.125, 0.875],
  [0.125, 0.625, 0.375],
  [0.1875, 0.3125, 0.9375],
  [0.6875, 0.8125, 0.4375],
];

it("gives the published first points", () => {
  expect(Array.from(sobolPoints(3, 10))).toEqual(FIRST.flat());
  expect(Array.from(sobolPoints(3, 4, 6))).toEqual(FIRST.slice(6).flat());
});

it("puts one point in each of 2^k equal intervals of every coordinate", () => {
  const [dimension, count] = [16, 1024];
  const points = sobolPoints(dimension, count);
  for (let d = 0; d < dimension; d++) {
    const cells = new Set(Array.from({ length: count }, (_, i) => Math.floor(points[i * dimension + d]! * count)));
    expect(cells.size).toBe(count);
  }
});

it("refuses a dimension it has no numbers for", () => {
  expect(() => sobolPoints(17, 1)).toThrow(/given dimension 17; allowed/);
});
