// Fits on an invented cart whose missing drag and gain are known.
import { beforeAll, describe, expect, it } from "vitest";
import { type Engine, openEngine } from "../../src/engine/openEngine.js";
import type { Run } from "../../src/logs/recording.js";
import type { ResidualTerm } from "../../src/model/controlAffine.js";
import { fittedModel } from "../../src/model/fittedModel.js";
import { featureValue } from "../../src/nets/features.js";
import { mlpEvaluator } from "../../src/nets/mlp.js";
import { seededRandom } from "../../src/num/random.js";
import { plantScaling } from "../../src/plant/scaling.js";
import { fitResidual } from "../../src/residual/fitResidual.js";
import { windowedError } from "../../src/residual/windowedError.js";
import { drag, dragCart, dragRuns, gain } from "./dragCart.js";
import { cart, evenTimes, piece, runOf } from "./invented.js";

let engine: Engine;
beforeAll(async () => {
  engine = await openEngine();
});

const services = (seed: number, signal?: AbortSignal, progress: (done: number) => void = () => undefined) => ({
  engine,
  random: seededRandom(seed),
  progress,
  signal,
});

/** The term in SI at a speed of the cart. */
function at(term: ResidualTerm, speed: number): number {
  const out = new Float64Array(1);
  mlpEvaluator(term.mlp).value(
    Float64Array.from(term.features, (feature) => featureValue(feature, (speed - 1) / 2)),
    out,
  );
  return term.outputScale * out[0]!;
}

describe("a fit with known truth", () => {
  it("finds the missing rate and the missing gain, and says how it went", async () => {
    const plant = dragCart(1200);
    const steps: number[] = [];
    const fitted = await fitResidual(
      plant,
      dragRuns(25, 1, 0.002),
      services(1, undefined, (done) => steps.push(done)),
    );
    expect(fitted.status).toBe("improved");
    const [rate, input] = fitted.residual.terms as [ResidualTerm, ResidualTerm];
    expect([rate.state, rate.input, input.state, input.input]).toEqual([1, null, 1, 0]);
    let [rateError, gainError] = [0, 0];
    for (let speed = -0.75; speed <= 2.75; speed += 0.1) {
      rateError = Math.max(rateError, Math.abs(at(rate, speed) - drag(speed)));
      gainError = Math.max(gainError, Math.abs(at(input, speed) - gain(speed)));
    }
    // the drag spans 1.4 m/s^2, the gain 0.4; at the very ends, where the drive saturates, they trade places
    expect(rateError).toBeLessThan(0.035);
    expect(gainError).toBeLessThan(0.03);

    expect(fitted.history.map(({ step }) => step)).toEqual(Array.from({ length: 25 }, (_, i) => 50 * i));
    expect(steps).toEqual(fitted.history.map(({ step }) => step));
    const best = fitted.history.find(({ step }) => step === fitted.bestStep)!;
    expect(best.validation).toBe(Math.min(...fitted.history.map(({ validation }) => validation)));
    expect(best.validation).toBeLessThan(fitted.history[0]!.validation / 50);
    expect([fitted.trainingRuns, fitted.validationRuns]).toEqual([20, 5]);

    const fresh = dragRuns(6, 2, 0.002);
    const errors = [null, fitted.residual].map(
      (residual) => windowedError(fittedModel(plant, residual), plantScaling(plant), fresh, 0.5).rates[1]!,
    );
    expect(errors[1]!).toBeLessThan(0.05 * errors[0]!);
  });

  it("is the same to the byte for the same seed, and not for another", async () => {
    const [plant, runs] = [dragCart(120), dragRuns(5, 3, 0.002)];
    const [first, again, other] = [
      JSON.stringify(await fitResidual(plant, runs, services(7))),
      JSON.stringify(await fitResidual(plant, runs, services(7))),
      JSON.stringify(await fitResidual(plant, runs, services(8))),
    ];
    expect(again).toBe(first);
    expect(other).not.toBe(first);
  });

  it("takes the plant's width and leaves no tensor behind", async () => {
    const before = engine.tf.memory().numTensors;
    const fitted = await fitResidual(dragCart(20), dragRuns(3, 4, 0), services(1));
    expect(engine.tf.memory().numTensors).toBe(before);
    expect(fitted.history.map(({ step }) => step)).toEqual([0, 20]);
    for (const { mlp } of fitted.residual.terms) expect(mlp.layers.map(({ bias }) => bias.length)).toEqual([10, 10, 1]);
  });
});

describe("a fit from an earlier residual", () => {
  it("keeps the hidden layers, takes three tenths of the steps, and follows a few runs of the changed cart", async () => {
    const plant = dragCart(600);
    const { residual: before } = await fitResidual(plant, dragRuns(12, 1, 0.002), services(1));
    const runs = dragRuns(5, 9, 0.002, 2);
    const { residual: after, history, status } = await fitResidual(plant, runs, services(2), before);
    expect(status).toBe("improved");
    expect(history.at(-1)!.step).toBe(180);
    for (const [j, { mlp, outputScale, features }] of after.terms.entries()) {
      const earlier = before.terms[j]!;
      expect({ outputScale, features }).toEqual({ outputScale: earlier.outputScale, features: earlier.features });
      expect(mlp.layers.slice(0, -1)).toEqual(earlier.mlp.layers.slice(0, -1));
      expect(mlp.layers.at(-1)).not.toEqual(earlier.mlp.layers.at(-1));
    }
    // twice the drag: the earlier terms are far off on fresh runs, the new ones near
    const fresh = dragRuns(4, 10, 0.002, 2);
    const [old, now] = [before, after].map(
      (residual) => windowedError(fittedModel(plant, residual), plantScaling(plant), fresh, 0.5).rates[1]!,
    ) as [number, number];
    expect(now).toBeLessThan(0.2 * old);
  });
});

describe("a fit that has nothing to give", () => {
  it("is empty where nothing is unknown, and needs no run for that", async () => {
    expect(await fitResidual(cart(), [], services(1))).toEqual({
      status: "nothingUnknown",
      residual: { terms: [] },
      history: [],
      bestStep: 0,
      trainingRuns: 0,
      validationRuns: 0,
    });
  });

  /** A constant push, so that the best the fit can learn from these runs is that constant. */
  const pushed = (push: number, id: string, seconds = 4): Run =>
    runOf(
      id,
      piece(
        evenTimes(0.05, seconds),
        (t) => [t + (push * t * t) / 2, 1 + push * t],
        () => [0],
      ),
    );

  it("keeps the prior where every step makes the validation runs worse", async () => {
    // the training runs are pushed forwards, the one that validates backwards
    const held = seededRandom(5).stream("validation").permutation(5)[0]!;
    const runs = Array.from({ length: 5 }, (_, i) => pushed(i === held ? -0.2 : 0.2, `r${i}`));
    const plant = cart({
      unknown: "[{ rate: speed, from: [speed] }]",
      settings: "networks: { residual: { width: 8, steps: 150 } }",
    });
    const fitted = await fitResidual(plant, runs, services(5));
    expect(fitted.status).toBe("noBetterThanPrior");
    expect(fitted.bestStep).toBe(0);
    expect(at(fitted.residual.terms[0]!, 0.3)).toBeCloseTo(0, 15);
    expect(fitted.history.at(-1)!.train).toBeLessThan(0.1 * fitted.history[0]!.train);
    expect(fitted.history.at(-1)!.validation).toBeGreaterThan(fitted.history[0]!.validation);
    // with all runs alike the same fit improves
    const alike = runs.map((_, i) => pushed(0.2, `r${i}`));
    const better = await fitResidual(plant, alike, services(5));
    expect(better.status).toBe("improved");
    expect(Math.abs(at(better.residual.terms[0]!, 1.3) - 0.2)).toBeLessThan(0.02);
  });

  it("refuses runs that hold no window, and says what to do", async () => {
    const plant = cart({ unknown: "[{ rate: speed, from: [speed] }]" });
    const short = Array.from({ length: 6 }, (_, i) => pushed(0.1, `r${i}`, 0.3));
    await expect(fitResidual(plant, short, services(1))).rejects.toThrow(
      /6 fit runs hold no stretch of 0\.5 s .* give at least two longer runs/s,
    );
    await expect(fitResidual(plant, [pushed(0.1, "one")], services(1))).rejects.toThrow(/the part to train on/);
    await expect(fitResidual(plant, [], services(1))).rejects.toThrow(/0 fit runs/);
  });
});

describe("an abort", () => {
  const plant = dragCart(400);
  it("before the start stops it at once", async () => {
    const fit = fitResidual(plant, dragRuns(3, 6, 0), services(1, AbortSignal.abort(new Error("stopped"))));
    await expect(fit).rejects.toThrow("stopped");
  });
  it("on the way stops it before the next report, and leaves no tensor behind", async () => {
    const before = engine.tf.memory().numTensors;
    const stop = new AbortController();
    const seen: number[] = [];
    const fit = fitResidual(
      plant,
      dragRuns(3, 6, 0),
      services(1, stop.signal, (done) => {
        seen.push(done);
        if (done === 100) stop.abort(new Error("stopped"));
      }),
    );
    await expect(fit).rejects.toThrow("stopped");
    expect(seen).toEqual([0, 50, 100]);
    expect(engine.tf.memory().numTensors).toBe(before);
  });
});
