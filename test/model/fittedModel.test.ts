// The fitted model against the plant's own rates in SI, its residual by hand, and its Jacobians by central differences.
import { describe, expect, it } from "vitest";
import { initialMlp } from "../../src/engine/trainableMlp.js";
import { newModelPoint, type ResidualFile } from "../../src/model/controlAffine.js";
import { fittedModel } from "../../src/model/fittedModel.js";
import { featuresOf } from "../../src/nets/features.js";
import { seededRandom } from "../../src/num/random.js";
import { newRatesPoint } from "../../src/plant/plant.js";
import { plantScaling } from "../../src/plant/scaling.js";
import { plantOf } from "../plant/reading.js";

/** Inputs off centre, uneven half-ranges, an angle that a term sees, a gain that depends on the states. */
const plant = plantOf(`
plant: winch
states:
  reel: { unit: m, envelope: [2, 9] }
  swing: { unit: deg, envelope: [-40, 70] }
  speed: { unit: m/s, envelope: [-0.5, 2.5] }
inputs:
  drive: { unit: m/s^2, range: [-0.4, 1.6] }
  brake: { unit: "1", range: [0.2, 0.9] }
rates:
  reel: speed * cos(swing)
  swing: -0.5 * sin(swing) + 0.2 * speed * brake
  speed: drive * (1 + 0.1 * reel) - 0.3 * speed^2 * brake
unknown:
  - { rate: speed, from: [speed, swing] }
  - { gain: drive, in: speed, from: [reel, speed] }
  - { gain: brake, in: swing, from: [swing] }
leftover:
  push: { unit: m/s^2, on: { speed: 1 + 0.05 * reel } }
logs: { files: [made-up.csv] }
margin: { minimise: speed }
`);
const scaling = plantScaling(plant);
const [n, m, p] = [3, 2, 1];
const random = seededRandom(12);
const residual: ResidualFile = {
  terms: plant.unknowns.map(({ state, input, dependsOn }, j) => {
    const features = featuresOf(plant, dependsOn);
    return { state, input, features, mlp: initialMlp([features.length, 7, 7, 1], random, 1), outputScale: 0.3 + j };
  }),
};

/** A term from its definition: outputScale * network of (values scaled, angles as sine and cosine). */
function term(j: number, x: Float64Array): number {
  const { mlp, outputScale } = residual.terms[j]!;
  let h = plant.unknowns[j]!.dependsOn.flatMap((i) =>
    plant.states[i]!.isAngle
      ? [Math.sin(x[i]!), Math.cos(x[i]!)]
      : [(x[i]! - scaling.stateCenter[i]!) / scaling.stateHalf[i]!],
  );
  for (const [l, { weights, bias }] of mlp.layers.entries()) {
    const a = weights.map((row, r) => row.reduce((sum, w, c) => sum + w * h[c]!, bias[r]!));
    h = l === mlp.layers.length - 1 ? a : a.map(Math.tanh);
  }
  return outputScale * h[0]!;
}

const point = () => Float64Array.from({ length: n }, () => 2 * random.uniform() - 1);
const si = (z: Float64Array) => z.map((value, i) => scaling.stateCenter[i]! + scaling.stateHalf[i]! * value);

describe("the fitted model", () => {
  it("is the plant's rates plus the terms, per scaled state, at inputs from the middle of their range", () => {
    const model = fittedModel(plant, residual);
    const out = newModelPoint(n, m, p);
    const prior = newRatesPoint(n, m, p);
    for (let trial = 0; trial < 20; trial++) {
      const z = point();
      const x = si(z);
      const v = [2 * random.uniform() - 1, 2 * random.uniform() - 1];
      const u = v.map((value, j) => scaling.inputCenter[j]! + scaling.inputHalf[j]! * value);
      model.evaluate(z, out);
      plant.rates.evaluate(x, prior);
      const rates = Array.from({ length: n }, (_, i) =>
        u.reduce((sum, value, j) => sum + prior.B[i * m + j]! * value, prior.f[i]!),
      );
      rates[2]! += term(0, x) + term(1, x) * u[0]!;
      rates[1]! += term(2, x) * u[1]!;
      for (let i = 0; i < n; i++) {
        const scaled = v.reduce((sum, value, j) => sum + out.B[i * m + j]! * value, out.f[i]!);
        expect(scaled * scaling.stateHalf[i]!).toBeCloseTo(rates[i]!, 12);
        expect(out.G[i * p]! * scaling.stateHalf[i]!).toBeCloseTo(prior.G[i * p]!, 12);
      }
    }
  });

  it.each([
    ["with the residual", residual],
    ["of the prior alone", null],
  ] as const)("has the Jacobians of its values, %s", (_, file) => {
    const model = fittedModel(plant, file);
    const [here, up, down] = [newModelPoint(n, m, p), newModelPoint(n, m, p), newModelPoint(n, m, p)];
    const h = 1e-5;
    for (let trial = 0; trial < 20; trial++) {
      const z = point();
      model.evaluate(z, here);
      for (let k = 0; k < n; k++) {
        const shifted = (step: number) => z.map((value, i) => (i === k ? value + step : value));
        model.evaluate(shifted(h), up);
        model.evaluate(shifted(-h), down);
        for (let i = 0; i < n; i++) {
          expect(here.dfdx[i * n + k]).toBeCloseTo((up.f[i]! - down.f[i]!) / (2 * h), 7);
          for (let j = 0; j < m; j++) {
            const slope = (up.B[i * m + j]! - down.B[i * m + j]!) / (2 * h);
            expect(here.dBdx[j * n * n + i * n + k]).toBeCloseTo(slope, 7);
          }
        }
      }
    }
  });

  it("without terms is the prior", () => {
    const [none, empty] = [newModelPoint(n, m, p), newModelPoint(n, m, p)];
    const z = point();
    fittedModel(plant, null).evaluate(z, none);
    fittedModel(plant, { terms: [] }).evaluate(z, empty);
    expect(empty).toEqual(none);
  });
});
