// Errors of rates over windows where they are known: a model that misses a constant, and one that has it.
import { describe, expect, it } from "vitest";
import type { ResidualFile } from "../../src/model/controlAffine.js";
import { fittedModel } from "../../src/model/fittedModel.js";
import { featuresOf } from "../../src/nets/features.js";
import { plantScaling } from "../../src/plant/scaling.js";
import { windowedError } from "../../src/residual/windowedError.js";
import { cart, evenTimes, piece, runOf } from "./invented.js";

describe("the error over windows", () => {
  const plant = cart({ unknown: "[{ rate: speed, from: [speed] }]" });
  const scaling = plantScaling(plant);
  // the truth: speed' = 0.6 - 0.3 speed + push with accel 0.6 and speed = e^{-t} (so the push is known)
  const speed = (t: number) => Math.exp(-t);
  const run = (slip: number) =>
    runOf(
      "r",
      piece(
        evenTimes(0.02, 3),
        (t) => [1 - speed(t) + slip * t, speed(t)],
        () => [0.6],
      ),
    );

  it("is what the prior misses: root mean square of window means in closed form", () => {
    const { rates, outside } = windowedError(fittedModel(plant, null), scaling, [run(0.25), run(0.25)], 0.5);
    let squares = 0;
    for (let k = 0; k <= 125; k++) {
      const [from, to] = [0.02 * k, 0.02 * k + 0.5];
      squares += ((speed(to) - speed(from)) / 0.5 - 0.6) ** 2;
    }
    expect(rates[1]).toBeCloseTo(Math.sqrt(squares / 126), 9);
    expect(outside[1]).toBeCloseTo(0, 12);
    // the slip of the place is in no channel; the trapezoid of the speed adds h^2/12 of its slope
    expect(rates[0]).toBeCloseTo(0.25, 4);
    expect(outside[0]).toBeCloseTo(rates[0]!, 12);
  });

  it("is zero for a model with the missing term: -0.6 - speed, written as a linear network", () => {
    const features = featuresOf(plant, [1]);
    // speed = 1 + 2 z, so -0.6 - speed = 2 (-0.8 - z)
    const mlp = { layers: [{ weights: [[-1]], bias: [-0.8] }] };
    const residual: ResidualFile = { terms: [{ state: 1, input: null, features, mlp, outputScale: 2 }] };
    const { rates } = windowedError(fittedModel(plant, residual), scaling, [run(0)], 0.5);
    // the trapezoid's error of -speed: h^2/12 of the mean slope, below 1/30000
    expect(rates[1]).toBeLessThan(1e-4);
    expect(windowedError(fittedModel(plant, null), scaling, [run(0)], 0.5).rates[1]).toBeGreaterThan(0.5);
  });

  it("is zero where no run holds a window", () => {
    const { rates, outside } = windowedError(fittedModel(plant, null), scaling, [run(0)], 4);
    expect([...rates, ...outside]).toEqual([0, 0, 0, 0]);
  });
});
