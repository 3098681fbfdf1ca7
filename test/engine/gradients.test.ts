import type * as Tf from "@tensorflow/tfjs-core";
import { beforeAll, describe, expect, it } from "vitest";
import { DIFFERENTIABLE } from "../../src/engine/gradients.js";
import { ENGINE_CANDIDATES, openEngine } from "../../src/engine/openEngine.js";

// Only wasm is opened here, so no other package can have brought derivatives along: what a clone without the native
// package has.
let tf: typeof Tf;
beforeAll(async () => {
  tf = (await openEngine(ENGINE_CANDIDATES.filter(({ name }) => name === "wasm"))).tf;
});

const A = [0.5, -1.25, 2, 0.75, -0.5, 1.5];
const B = [1.5, -0.5, 0.25, -1.75, 1, -2];
const ROW = [0.75, -1.5, 1.25];

type Operation = (a: Tf.Tensor, b: Tf.Tensor, row: Tf.Tensor) => Tf.Tensor;

const operations: readonly (readonly [string, () => Operation])[] = [
  ["Abs", () => (a) => tf.abs(a)],
  ["Add", () => (a, b) => tf.add(a, b)],
  ["Add of a repeated row", () => (a, _, row) => tf.add(a, row)],
  ["BatchMatMul", () => (a, b) => tf.matMul(a as Tf.Tensor2D, tf.reshape(b, [3, 2]) as Tf.Tensor2D)],
  ["BatchMatMul, left transposed", () => (a, b) => tf.matMul(a as Tf.Tensor2D, b as Tf.Tensor2D, true, false)],
  ["BatchMatMul, right transposed", () => (a, b) => tf.matMul(a as Tf.Tensor2D, b as Tf.Tensor2D, false, true)],
  [
    "BatchMatMul, both transposed",
    () => (a, b) => tf.matMul(a as Tf.Tensor2D, tf.reshape(b, [3, 2]) as Tf.Tensor2D, true, true),
  ],
  ["Cast", () => (a, b) => tf.mul(tf.cast(a, "float32"), b)],
  ["Concat", () => (a, b) => tf.concat([a, b, a], 1)],
  ["Identity", () => (a, b) => tf.mul(tf.clone(a), b)],
  ["Minimum", () => (a, b) => tf.minimum(a, b)],
  ["Minimum with a number", () => (a) => tf.minimum(a, 0.6)],
  ["Multiply", () => (a, b) => tf.mul(a, b)],
  ["Multiply by a repeated row", () => (a, _, row) => tf.mul(row, a)],
  ["RealDiv", () => (a, b) => tf.div(a, b)],
  ["RealDiv by a repeated row", () => (a, _, row) => tf.div(a, row)],
  ["Reshape", () => (a) => tf.square(tf.reshape(a, [6]))],
  ["Square", () => (a) => tf.square(a)],
  ["Sub", () => (a, b) => tf.sub(a, tf.mul(2, b))],
  ["Sub from a repeated row", () => (a, _, row) => tf.sub(row, a)],
  ["Sum over all", () => (a) => tf.square(tf.sum(a))],
  ["Sum over an axis", () => (a) => tf.square(tf.sum(a, 1, true))],
  ["Tanh", () => (a) => tf.tanh(a)],
];

describe("derivatives on wasm", () => {
  it("come from nowhere else", () => {
    expect(tf.getGradient("Exp")).toBeUndefined();
  });
  it("are tried below, each one", () => {
    for (const name of DIFFERENTIABLE) expect(operations.some(([title]) => title.startsWith(name))).toBe(true);
  });
  it.each(operations)("%s: matches central differences", (_, operation) => {
    // A scalar that weighs every entry of the result differently; its differences are exact to float32.
    const scalar = (a: Tf.Tensor, b: Tf.Tensor, row: Tf.Tensor): Tf.Scalar => {
      const y = tf.reshape(operation()(a, b, row), [-1]);
      const weights = tf.tensor1d(Array.from({ length: y.size }, (_, i) => 1 + 0.5 * i));
      return tf.sum(tf.mul(y, weights)) as Tf.Scalar;
    };
    const values = [A, B, ROW];
    const tensors = (all: readonly (readonly number[])[]): [Tf.Tensor, Tf.Tensor, Tf.Tensor] => [
      tf.tensor2d([...all[0]!], [2, 3]),
      tf.tensor2d([...all[1]!], [2, 3]),
      tf.tensor2d([...all[2]!], [1, 3]),
    ];
    const [of0, ...rest] = tf.tidy(() => {
      const inputs = tensors(values);
      // every argument takes part, so that the library has a gradient for each
      const tied = (a: Tf.Tensor, b: Tf.Tensor, row: Tf.Tensor): Tf.Scalar =>
        tf.add(scalar(a, b, row), tf.mul(0, tf.add(tf.sum(b), tf.sum(row)))) as Tf.Scalar;
      return tf
        .grads(tied as (...args: Tf.Tensor[]) => Tf.Tensor)(inputs)
        .map((g) => Array.from(g.dataSync()));
    });
    const step = 1 / 64;
    [of0!, ...rest].forEach((gradient, which) => {
      gradient.forEach((slope, i) => {
        const at = (delta: number): number =>
          tf.tidy(() => {
            const moved = values.map((array, w) => array.map((v, k) => (w === which && k === i ? v + delta : v)));
            return scalar(...tensors(moved)).dataSync()[0]!;
          });
        // fourth order: the error of the differences is below float32's
        const numeric = (8 * (at(step) - at(-step)) - (at(2 * step) - at(-2 * step))) / (12 * step);
        expect(Math.abs(slope - numeric)).toBeLessThan(2e-3 * (1 + Math.abs(numeric)));
      });
    });
  });
});
