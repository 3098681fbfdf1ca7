// Curves of terms that are linear, so that networks and logs can hold them exactly.
import { describe, expect, it } from "vitest";
import { heldDraws } from "../../data/make/simulate.js";
import type { Run } from "../../src/logs/recording.js";
import type { ResidualFile } from "../../src/model/controlAffine.js";
import { featuresOf } from "../../src/nets/features.js";
import { seededRandom } from "../../src/num/random.js";
import type { Plant } from "../../src/plant/plant.js";
import { residualCurves } from "../../src/residual/residualCurves.js";
import { plantOf } from "../plant/reading.js";
import { cart, clamped, evenTimes, piece, runOf, simulated } from "./invented.js";

/** A network of one linear layer on the plant's features of each unknown term. */
function linear(plant: Plant, ...layers: readonly { weights: readonly number[]; bias: number }[]): ResidualFile {
  return {
    terms: plant.unknowns.map(({ state, input, dependsOn }, j) => ({
      state,
      input,
      features: featuresOf(plant, dependsOn),
      mlp: { layers: [{ weights: [layers[j]!.weights], bias: [layers[j]!.bias] }] },
      outputScale: 0.5,
    })),
  };
}

const drag = (speed: number): number => -0.25 * speed;
const gain = (speed: number): number => -0.3 + 0.1 * speed;
const plant = cart({ unknown: "[{ rate: speed, from: [speed] }, { gain: accel, in: speed, from: [speed] }]" });
// speed = 1 + 2 z: drag = -0.25 - 0.5 z, gain = -0.2 + 0.2 z; networks hold twice that
const exact = [
  { weights: [-1], bias: -0.5 },
  { weights: [0.4], bias: -0.4 },
] as const;
const zero = { weights: [0], bias: 0 };

function runs(count: number, seed: number): Run[] {
  return Array.from({ length: count }, (_, i) => {
    const random = seededRandom(seed).stream(`run ${i}`);
    const goal = heldDraws(random, [1, 4], () => -1.2 + 4.4 * random.uniform());
    const dither = heldDraws(random, [0.6, 1.5], () => 2 * random.uniform() - 1);
    return simulated(
      `run ${i}`,
      {
        rates: ([, s], [u]) => [s!, u! * (1 + gain(s!)) + drag(s!)],
        law: (t, [, s]) => [clamped(2 * (goal(t) - s!) - drag(s!) + dither(t), -1, 2)],
        start: [0, -1 + 4 * random.uniform()],
      },
      evenTimes(0.05, 10),
      () => 0,
    );
  });
}

describe("curves of fitted terms", () => {
  it("run over the envelope in 41 points and hold the network's values", () => {
    const [rate, input] = residualCurves(plant, linear(plant, ...exact), []);
    expect(rate).toMatchObject({ title: "added to the rate of speed", unit: "m/s^2", logged: [] });
    expect(input).toMatchObject({ title: "gain of accel in speed", unit: "1", logged: [] });
    expect(rate!.x).toMatchObject({ name: "speed", unit: "m/s" });
    expect(rate!.x.values).toHaveLength(41);
    expect([rate!.x.values[0], rate!.x.values[10], rate!.x.values.at(-1)]).toEqual([-1, 0, 3]);
    for (const [i, x] of rate!.x.values.entries()) {
      expect(rate!.fitted[i]).toBeCloseTo(drag(x), 12);
      expect(input!.fitted[i]).toBeCloseTo(gain(x), 12);
    }
  });

  it("set the logs beside them: the truth, whatever the term's own network says", () => {
    const logs = runs(12, 1);
    const wrong = [{ weights: [3], bias: 2 }, zero] as const;
    const [rate] = residualCurves(plant, linear(plant, wrong[0], exact[1]), logs);
    const [, input] = residualCurves(plant, linear(plant, exact[0], wrong[1]), logs);
    expect(rate!.logged.length).toBeGreaterThan(20);
    expect(rate!.logged.length).toBeLessThanOrEqual(25);
    for (const { x, y } of rate!.logged) expect(Math.abs(y - drag(x))).toBeLessThan(2e-3);
    expect(input!.logged.length).toBeGreaterThan(15);
    // a gain stands for its window's mean state, where input and state move together by a little
    for (const { x, y } of input!.logged) expect(Math.abs(y - gain(x))).toBeLessThan(0.02);
    for (const { logged } of [rate!, input!]) {
      const x = logged.map((point) => point.x);
      expect(x).toEqual(x.toSorted((a, b) => a - b));
      for (const [i, value] of x.entries()) {
        const bin = Math.min(24, Math.floor(((value + 1) / 4) * 25));
        expect(x.findIndex((other) => Math.min(24, Math.floor(((other + 1) / 4) * 25)) === bin)).toBe(i);
      }
    }
  });

  it("put what another term of the same rate lacks on the term", () => {
    // with no gain fitted, the drag must carry it: at a steady speed 0 = u (1 + gain) + drag
    const u = 0.5;
    const speed = 0.4;
    const still = runOf(
      "r",
      piece(
        evenTimes(0.05, 2),
        () => [0, speed],
        () => [u],
      ),
    );
    const [rate, input] = residualCurves(plant, linear(plant, zero, zero), [still]);
    expect(rate!.logged).toHaveLength(1);
    expect(rate!.logged[0]!.x).toBeCloseTo(speed, 12);
    expect(rate!.logged[0]!.y).toBeCloseTo(-u, 12);
    expect(input!.logged[0]!.y).toBeCloseTo(-1, 12);
    // and with the drag known, -u - drag(speed) is left for the gain
    const [, alone] = residualCurves(plant, linear(plant, exact[0], zero), [still]);
    expect(alone!.logged[0]!.y).toBeCloseTo((-u - drag(speed)) / u, 10);
  });

  it("leave out gains of a small input and states outside the envelope", () => {
    const held = (u: number, speed: number) =>
      runOf(
        "r",
        piece(
          evenTimes(0.05, 2),
          () => [0, speed],
          () => [u],
        ),
      );
    const file = linear(plant, zero, zero);
    // 30 % of the half-range 1.5 is 0.45
    expect(residualCurves(plant, file, [held(0.44, 1)])[1]!.logged).toHaveLength(0);
    expect(residualCurves(plant, file, [held(0.46, 1)])[1]!.logged).toHaveLength(1);
    expect(residualCurves(plant, file, [held(-0.46, 1)])[1]!.logged).toHaveLength(1);
    expect(residualCurves(plant, file, [held(1, 3.1), held(1, -1.1)]).flatMap(({ logged }) => logged)).toEqual([]);
  });
});

describe("curves of a term of two states", () => {
  const two = cart({ unknown: "[{ rate: speed, from: [place, speed] }]" });
  const file = linear(two, { weights: [0.6, -0.8], bias: 0.2 });
  const at = (place: number, speed: number) =>
    runOf(
      "r",
      piece(
        evenTimes(0.05, 1),
        () => [place, speed],
        () => [0.1 * speed + 0.01 * place],
      ),
    );
  it("are one a state, the other at the middle of the envelope", () => {
    const [place, speed] = residualCurves(two, file, []);
    expect([place!.x.name, speed!.x.name]).toEqual(["place", "speed"]);
    for (const [i, x] of place!.x.values.entries()) expect(place!.fitted[i]).toBeCloseTo(0.1 + 0.3 * (x / 30), 12);
    for (const [i, x] of speed!.x.values.entries()) expect(speed!.fitted[i]).toBeCloseTo(0.1 - 0.4 * ((x - 1) / 2), 12);
  });
  it("take only windows whose other state is within a quarter of its range from the middle", () => {
    const near = [at(-14, 0.2), at(14, 0.2), at(10, 2)];
    const far = [at(-16, 0.2), at(25, 0.2), at(15.5, -0.5)];
    const [, speed] = residualCurves(two, file, [...near, ...far]);
    expect(speed!.logged).toHaveLength(2);
    expect(speed!.logged[0]!.x).toBeCloseTo(0.2, 10);
    expect(speed!.logged[0]!.y).toBeCloseTo(-0.02, 10); // -14 and 14 m cancel
    expect(speed!.logged[1]!.y).toBeCloseTo(-(0.2 + 0.1), 10);
    const [place] = residualCurves(two, file, [at(3, 1.9), at(3, 2.1), at(-29, 0.1), at(-29, -0.1)]);
    expect(place!.logged.map(({ x }) => Math.round(x))).toEqual([-29, 3]);
  });
});

describe("curves in the plant file's units", () => {
  const swing = (angle: number, turns: number) =>
    runOf(
      "r",
      piece(
        evenTimes(0.05, 1),
        () => [angle + 2 * Math.PI * turns, 0.5],
        () => [0.3],
      ),
    );
  const beam = plantOf(`
plant: beam
states:
  angle: { unit: deg, envelope: [-180, 180] }
  pace: { unit: km/h, envelope: [-7.2, 7.2] }
inputs:
  pull: { unit: kN, range: [-0.0005, 0.0005] }
rates:
  angle: pace
  pace: pull
unknown:
  - { rate: angle, from: [angle] }
  - { gain: pull, in: pace, from: [pace] }
leftover:
  push: { unit: m/s^2, on: { pace: 1 } }
logs: { files: [made-up.csv] }
margin: { minimise: pace }
`);
  const file = linear(beam, { weights: [1, 0], bias: 0 }, { weights: [1], bias: 0 });

  it("convert values, and gains by both units", () => {
    const [angle, pull] = residualCurves(beam, file, []);
    expect([angle!.unit, angle!.x.unit]).toEqual(["deg/s", "deg"]);
    expect([angle!.x.values[0], angle!.x.values[30]]).toEqual([-180, 90]);
    expect(angle!.fitted[30]).toBeCloseTo((0.5 * 180) / Math.PI, 10);
    expect([pull!.unit, pull!.x.unit]).toEqual(["km/h/s per kN", "km/h"]);
    // 0.5 m/s^2 per N at the end of the envelope: 1.8 km/h a second per N
    expect(pull!.x.values[40]).toBeCloseTo(7.2, 12);
    expect(pull!.fitted[40]).toBeCloseTo(1800, 9);
  });
  it("find an angle again after whole turns", () => {
    const [here] = residualCurves(beam, file, [swing(0.8, 0)]);
    const [there] = residualCurves(beam, file, [swing(0.8, 3)]);
    expect(here!.logged).toHaveLength(1);
    expect(here!.logged[0]!.x).toBeCloseTo((0.8 * 180) / Math.PI, 9);
    expect(there!.logged[0]!.x).toBeCloseTo(here!.logged[0]!.x, 9);
    expect(there!.logged[0]!.y).toBeCloseTo((-0.5 * 180) / Math.PI, 9);
  });
});
