import { readFileSync } from "node:fs";
import { resolve } from "node:path";
import { describe, expect, it } from "vitest";
import type { ResidualFile } from "../../src/model/controlAffine.js";
import { fittedModel } from "../../src/model/fittedModel.js";
import { type DualMetricFile, dualMetric } from "../../src/nets/dualMetric.js";
import { readPlant } from "../../src/plant/readPlant.js";
import { closedLoop, type LoopSettings } from "../../src/track/closedLoop.js";
import { PATH_SETTINGS } from "../../src/track/shortestPath.js";
import { trackingLaw } from "../../src/track/trackingLaw.js";
import { radiusAt } from "../../src/tube/tube.js";
import { constantMetric, handModel, threeStateMetric } from "../support/handModel.js";
import { drivenThreeState, FLAT, inverseForm, restricted, threeStateEnergy, vector } from "./subjects.js";

const half = 2;
const rate = 0.7;
const model = drivenThreeState(half, 20);
const law = trackingLaw(model, restricted(threeStateMetric(half), [0]));
const plan = {
  start: vector(0.2, 0.1, -0.1),
  inputs: (time: number, u: Float64Array): void => {
    u[0] = 0.05 * Math.sin(1.3 * time);
  },
  rate: (): number => rate,
};
const calm = (_time: number, _z: Float64Array, w: Float64Array): void => {
  w.fill(0);
};
const settings: LoopSettings = {
  start: vector(0.5, -0.2, 0.3),
  step: 0.02,
  steps: 250,
  law: "continuous",
  disturbance: calm,
};

describe("closed loop", () => {
  it("without a disturbance the closed-form distance falls at the rate, from step to step", () => {
    for (const mode of ["continuous", "sampled"] as const) {
      const run = closedLoop(model, law, plan, { ...settings, law: mode });
      const energyAt = (k: number): number =>
        threeStateEnergy(half, run.planned.slice(3 * k, 3 * k + 3), run.states.slice(3 * k, 3 * k + 3));
      // holding the input over a step costs some of the rate
      const kept = mode === "continuous" ? 1 : 0.9;
      for (let k = 0; k < 250; k++) {
        expect(run.distance[k]).toBeCloseTo(Math.sqrt(energyAt(k)), 8);
        expect(energyAt(k + 1)).toBeLessThanOrEqual(energyAt(k) * Math.exp(-2 * rate * kept * 0.02) + 1e-8);
      }
      expect(run.distance[250]).toBeLessThan(run.distance[0]! * Math.exp(-rate * kept * 5) + 1e-6);
      expect(run.notConverged).toBe(0);
      expect(run.counts.corrected).toBeGreaterThan(50);
      expect(run.largestShortfall).toBe(0);
    }
  });

  it("a path left straight, never improved, still contracts its own energy and bounds the distance", () => {
    const path = { ...PATH_SETTINGS, maxIterations: 0 };
    const lazy = trackingLaw(model, threeStateMetric(half), { path });
    const run = closedLoop(model, lazy, plan, { ...settings, start: vector(0.9, -0.8, 0.6), step: 0.005 });
    expect(run.notConverged).toBeGreaterThan(900);
    expect(run.largestShortfall).toBe(0);
    let widest = 0;
    for (let k = 0; k < 250; k++) {
      expect(run.distance[k + 1]).toBeLessThanOrEqual(run.distance[k]! * Math.exp(-rate * 0.005) + 1e-7);
      const d = Math.sqrt(
        threeStateEnergy(half, run.planned.slice(3 * k, 3 * k + 3), run.states.slice(3 * k, 3 * k + 3)),
      );
      expect(run.distance[k]).toBeGreaterThanOrEqual(d - 1e-12);
      widest = Math.max(widest, run.distance[k]! / d);
    }
    expect(widest).toBeGreaterThan(1.02);
  });

  it("a learned metric under a planar rotation keeps its rate to the last digit, on short paths too", () => {
    const bench = resolve(import.meta.dirname, "../bench/proofArtifacts");
    const read = readPlant(readFileSync(`${bench}/submersible.yaml`, "utf8"), "submersible.yaml");
    if (!read.ok) throw new Error(JSON.stringify(read.problems));
    const saved = JSON.parse(readFileSync(`${bench}/submersible.json`, "utf8")) as {
      residual: ResidualFile;
      metric: DualMetricFile;
    };
    const vessel = fittedModel(read.plant, saved.residual);
    const start = new Float64Array(vessel.n);
    vessel.embed(new Float64Array(vessel.active.length), start);
    const run = closedLoop(
      vessel,
      trackingLaw(vessel, dualMetric(saved.metric)),
      { start, inputs: (t, u) => u.set(u.map((_, j) => 0.2 * Math.sin(0.3 * t + j))), rate: () => 0.15 },
      {
        start: start.map((value, i) => value + 0.003 * Math.cos(3 * i)),
        step: 0.01,
        steps: 1000,
        law: "continuous",
        disturbance: calm,
      },
    );
    expect(run.counts.plan + run.counts.corrected).toBe(4001);
    expect(run.counts.corrected).toBeGreaterThan(500);
    for (let k = 0; k < 1000; k++) {
      const rateKept = Math.log(run.distance[k]! / run.distance[k + 1]!) / 0.01;
      expect(rateKept).toBeGreaterThan(0.15 * 0.999);
    }
  });

  it("with the disturbance at its bound it stays in the tube, and needs most of it", () => {
    const wbar = 0.3;
    // w pushes along x3 alone, the same in flat coordinates: sigma is closed form
    const sigma = (wbar * Math.sqrt(inverseForm(FLAT, [0, 0, 1]))) / half;
    const pushes: ((time: number) => number)[] = [() => 1, () => -1, (t) => Math.sign(Math.sin(2.1 * t + 0.1))];
    let used = 0;
    for (const push of pushes) {
      const run = closedLoop(model, law, plan, {
        ...settings,
        start: plan.start,
        step: 0.01,
        steps: 800,
        disturbance: (time, _z, w) => {
          w[0] = wbar * push(time);
        },
      });
      expect(run.counts.short + run.counts.saturated + run.counts.noControl + run.counts.noMetric).toBe(0);
      const limit = radiusAt(8, { window: 0, sigma }, rate, 0);
      run.distance.forEach((distance, k) => {
        expect(distance).toBeLessThanOrEqual(radiusAt(run.time[k]!, { window: 0, sigma }, rate, 0) * 1.001 + 1e-9);
        used = Math.max(used, distance / limit);
      });
    }
    expect(used).toBeGreaterThan(0.5);
  });

  it("a linear plant under a law that does nothing follows the exponential with fourth order", () => {
    const decay = handModel({ n: 1, m: 1, p: 1, f: (z) => [-z[0]!], B: () => [[1]], G: () => [[2]] });
    const still = trackingLaw(decay, constantMetric([[1]]));
    const errorOf = (steps: number): number => {
      const run = closedLoop(
        decay,
        still,
        { start: vector(1), inputs: (_t, u) => u.fill(0), rate: () => 0.5 },
        {
          start: vector(1),
          step: 1 / steps,
          steps,
          law: "continuous",
          disturbance: (time, _z, w) => {
            w[0] = 0.1 * time;
          },
        },
      );
      expect(Math.abs(run.planned[steps]! - Math.exp(-1))).toBeLessThan(1e-5);
      // the plant decays at 1 by itself, more than the 0.5 asked for: z' = -z + 0.2 t, z(1) = 1.2 / e
      expect(run.inputs.every((u) => u === 0)).toBe(true);
      return Math.abs(run.states[steps]! - 1.2 * Math.exp(-1));
    };
    expect(errorOf(10) / errorOf(20)).toBeGreaterThan(14);
    expect(errorOf(10) / errorOf(20)).toBeLessThan(18);
  });

  it("counts saturated steps", () => {
    const weak = drivenThreeState(half, 0.2);
    const run = closedLoop(weak, trackingLaw(weak, threeStateMetric(half)), plan, { ...settings, steps: 20 });
    expect(run.counts.short).toBeGreaterThan(0);
    expect(run.largestShortfall).toBeGreaterThan(0);
    for (const u of run.inputs) expect(Math.abs(u)).toBeLessThanOrEqual(1);
  });

  it("refuses a step that goes nowhere", () => {
    expect(() => closedLoop(model, law, plan, { ...settings, step: 0 })).toThrow(/step is 0 s/);
    expect(() => closedLoop(model, law, plan, { ...settings, steps: 1.5 })).toThrow(/steps 1\.5/);
  });
});
