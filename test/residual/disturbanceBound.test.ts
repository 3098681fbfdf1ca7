// The bound on runs with constant pushes, where every window mean of a run is known: scores and ranks by hand.
import { describe, expect, it } from "vitest";
import type { Run } from "../../src/logs/recording.js";
import { fittedModel } from "../../src/model/fittedModel.js";
import { seededRandom } from "../../src/num/random.js";
import type { Plant } from "../../src/plant/plant.js";
import { plantScaling } from "../../src/plant/scaling.js";
import { chooseWindow, WINDOW_GRID } from "../../src/residual/chooseWindow.js";
import {
  channelScales,
  disturbanceBound,
  runPeaks,
  type SplitOfRuns,
  scoreRun,
} from "../../src/residual/disturbanceBound.js";
import { cart, evenTimes, piece, runOf } from "./invented.js";

const SLIP = "  slip: { unit: cm/s, on: { place: 1 } }";
const PUSH = "  push: { unit: m/s^2, on: { speed: 1 } }";
const plant = cart({ leftover: `${SLIP}\n${PUSH}` });

/** Slip on the place (m/s) and push on the speed (m/s^2), both constant. */
function pushed(id: string, slip: number, push: number, seconds = 2): Run {
  const states = (t: number) => [t + (push * t * t) / 2 + slip * t, 1 + push * t];
  return runOf(
    id,
    piece(evenTimes(0.1, seconds), states, () => [0]),
  );
}

function fleet(count: number, seed: number, factor = 1): SplitOfRuns {
  const random = seededRandom(seed);
  const draw = (part: string) =>
    Array.from({ length: count }, (_, i) => {
      const [slip, push] = [0.05 * random.normal(), 0.2 * random.normal()];
      return pushed(`${part}${i}`, factor * slip, factor * push);
    });
  return { fit: draw("f"), calibration: draw("c"), test: draw("t") };
}

const boundOf = (split: SplitOfRuns, confidence: number, of: Plant = plant) =>
  disturbanceBound(fittedModel(of, null), plantScaling(of), split, 0.5, confidence);

function bounded(split: SplitOfRuns, confidence: number, of: Plant = plant) {
  const result = boundOf(split, confidence, of);
  if (result.status !== "bounded") throw new Error(result.status);
  return result;
}

describe("the disturbance bound", () => {
  it("is the conformal rank of the worst scaled channel, scaled back", () => {
    const fit = [pushed("f0", 0.02, -0.1), pushed("f1", -0.04, 0.3)]; // scales 0.03 and 0.2
    const slips = [0.01, 0.03, -0.09, 0.02, 0.05, 0.01, -0.02, 0.04, 0.02];
    const pushes = [0.1, 0.5, 0.1, -0.8, 0.2, 0.02, 0.06, -0.3, 0.14];
    const calibration = slips.map((slip, i) => pushed(`c${i}`, slip, pushes[i]!));
    const test = [pushed("t0", 0.089, -0.59), pushed("t1", 0.121, 0), pushed("t2", 0, 0.81), pushed("t3", 0, 0)];
    const scores = slips.map((slip, i) => Math.max(Math.abs(slip) / 0.03, Math.abs(pushes[i]!) / 0.2));
    const sorted = scores.toSorted((a, b) => a - b);
    for (const [confidence, rank] of [
      [0.9, 9],
      [0.8, 8],
      [0.5, 5],
    ] as const) {
      const result = bounded({ fit, calibration, test }, confidence);
      expect(result.rank).toBe(rank);
      expect(result.calibrationRuns).toBe(9);
      expect(result.scale[0]).toBeCloseTo(0.03, 10);
      expect(result.scale[1]).toBeCloseTo(0.2, 10);
      expect(result.quantile).toBeCloseTo(sorted[rank - 1]!, 9);
      expect(result.bound[0]).toBeCloseTo(0.03 * sorted[rank - 1]!, 10);
      expect(result.bound[1]).toBeCloseTo(0.2 * sorted[rank - 1]!, 9);
      expect(result.scores.calibration.map(({ run }) => run)).toEqual(calibration.map(({ id }) => id));
      for (const [i, { score, channel }] of result.scores.calibration.entries()) {
        expect(score).toBeCloseTo(scores[i]!, 9);
        expect(channel).toBe(Math.abs(slips[i]!) / 0.03 > Math.abs(pushes[i]!) / 0.2 ? 0 : 1);
      }
    }
    // quantile 4 at rank 9: t1 has 4.03, t2 4.05
    expect(bounded({ fit, calibration, test }, 0.9).testShareCovered).toBe(0.5);
    expect(bounded({ fit, calibration, test: [] }, 0.9).testShareCovered).toBe(1);
  });

  it("doubles with the disturbance", () => {
    const [once, twice] = [bounded(fleet(20, 4), 0.9), bounded(fleet(20, 4, 2), 0.9)];
    expect(twice.quantile).toBeCloseTo(once.quantile, 8);
    for (const [c, value] of once.bound.entries()) expect(twice.bound[c]! / value).toBeCloseTo(2, 8);
  });

  it("moves with its channels when they change places", () => {
    const swapped = cart({ leftover: `${PUSH}\n${SLIP}` });
    const [here, there] = [bounded(fleet(20, 5), 0.9), bounded(fleet(20, 5), 0.9, swapped)];
    expect(there.bound[0]).toBeCloseTo(here.bound[1]!, 12);
    expect(there.bound[1]).toBeCloseTo(here.bound[0]!, 12);
    expect(there.scores.test.map(({ channel }) => channel)).toEqual(here.scores.test.map(({ channel }) => 1 - channel));
  });

  it("does not depend on the order of the runs, and not on the test runs", () => {
    const split = fleet(15, 6);
    const turned = { fit: split.fit.toReversed(), calibration: split.calibration.toReversed(), test: [] };
    const [here, there] = [bounded(split, 0.9), bounded(turned, 0.9)];
    for (const [c, value] of here.bound.entries()) expect(there.bound[c]! / value).toBeCloseTo(1, 12);
  });

  it("is refused with too few runs, and says how many it takes", () => {
    const few = (count: number) => ({ ...fleet(20, 7), calibration: fleet(count, 8).calibration });
    expect(boundOf(few(8), 0.9)).toEqual({ status: "tooFewRuns", calibrationRuns: 8, runsNeeded: 9 });
    expect(boundOf(few(9), 0.9).status).toBe("bounded");
    expect(boundOf(few(18), 0.95)).toEqual({ status: "tooFewRuns", calibrationRuns: 18, runsNeeded: 19 });
    expect(boundOf(few(19), 0.95).status).toBe("bounded");
  });

  it("gives no score to a run too short for a window: it counts for nothing", () => {
    const split = fleet(9, 9);
    const short = [...split.calibration.slice(0, 8), pushed("short", 9, 9, 0.4)];
    expect(boundOf({ ...split, calibration: short }, 0.9)).toMatchObject({
      status: "tooFewRuns",
      calibrationRuns: 8,
    });
    expect(boundOf({ ...split, fit: [pushed("short", 0.1, 0.1, 0.4)] }, 0.9).status).toBe("tooFewRuns");
    const full = bounded(split, 0.9);
    const more = bounded({ ...split, test: [...split.test, pushed("short", 9, 9, 0.4)] }, 0.9);
    expect(more.testShareCovered).toBe(full.testShareCovered);
    expect(more.scores.test).toHaveLength(9);
  });
});

describe("windows inside the envelope", () => {
  // the speed's envelope ends at 3 m/s: 0.1 m/s^2 up to there, 5 m/s^2 beyond, then back inside at 0.2 m/s^2
  const speedAt = (t: number): number => (t < 2 ? 2.75 + 0.1 * t : t < 3 ? 2.95 + 5 * (t - 2) : 0.2 * (t - 3));
  const excursion = runOf(
    "out",
    piece(
      evenTimes(0.1, 5),
      (t) => [0, speedAt(t)],
      () => [0],
    ),
  );
  const pushOnly = cart();
  const model = fittedModel(pushOnly, null);
  const scaling = plantScaling(pushOnly);

  it("alone count: a window that holds one sample outside says nothing of the claim", () => {
    // windows from 0 to 2 s and from 3 s on are inside throughout; the samples at 2.1 to 2.9 s are not
    expect(runPeaks(model, scaling, excursion, 0.5)![0]).toBeCloseTo(0.2, 9);
    const inside = runOf("in", { ...excursion.pieces[0]!, time: excursion.pieces[0]!.time.subarray(0, 21) });
    expect(runPeaks(model, scaling, inside, 0.5)![0]).toBeCloseTo(0.1, 9);
  });
  it("are none in a run that is outside throughout: it has no score", () => {
    const away = runOf(
      "away",
      piece(
        evenTimes(0.1, 3),
        () => [0, 3.2],
        () => [0],
      ),
    );
    expect(runPeaks(model, scaling, away, 0.5)).toBeNull();
    expect(scoreRun(model, scaling, away, { window: 0.5, scale: [1] })).toBeNull();
  });
  it("are not asked of states that a declared symmetry leaves out", () => {
    const far = (of: Plant) =>
      runPeaks(
        fittedModel(of, null),
        plantScaling(of),
        runOf(
          "far",
          piece(
            evenTimes(0.1, 2),
            (t) => [1000 + t, 1],
            () => [0],
          ),
        ),
        0.5,
      );
    expect(far(pushOnly)).toBeNull();
    expect(far(cart({ settings: "symmetry: { translation: [place] }" }))![0]).toBeCloseTo(0, 9);
  });
  it("score a run as the bound does", () => {
    const split = fleet(12, 10);
    const result = bounded(split, 0.9);
    for (const [i, run] of split.test.entries()) {
      expect(scoreRun(fittedModel(plant, null), plantScaling(plant), run, result)).toEqual(result.scores.test[i]);
    }
  });
});

describe("the chosen window", () => {
  const model = fittedModel(plant, null);
  const scaling = plantScaling(plant);
  const noisy = (noise: number, slip: number, seed: number, seconds = 6): Run[] => {
    const random = seededRandom(seed);
    return Array.from({ length: 6 }, (_, i) => {
      const run = pushed(`n${i}`, slip, 2 * slip, seconds);
      return runOf(run.id, {
        ...run.pieces[0]!,
        states: run.pieces[0]!.states.map((value) => value + noise * random.normal()),
      });
    });
  };
  it("is the shortest for exact sensors and a steady leftover, the longest for pure noise", () => {
    expect(chooseWindow(model, scaling, noisy(0, 0.05, 1))).toBe(WINDOW_GRID[0]);
    expect(chooseWindow(model, scaling, noisy(0.01, 0, 1))).toBe(WINDOW_GRID.at(-1));
  });
  it("has the least mean cost over the channels, worked out one by one", () => {
    const runs = noisy(0.0015, 0.05, 2);
    const costs = WINDOW_GRID.map((window) => {
      const factor = window / (1 - Math.exp(-window));
      const peaks = runs.map((run) => [...runPeaks(model, scaling, run, window)!]);
      return [0, 1].map((c) => (factor * peaks.reduce((sum, peak) => sum + peak[c]!, 0)) / runs.length);
    });
    const totals = costs.map((cost) =>
      [0, 1].reduce((sum, c) => sum + cost[c]! / Math.min(...costs.map((other) => other[c]!)), 0),
    );
    const best = WINDOW_GRID[totals.indexOf(Math.min(...totals))]!;
    expect(chooseWindow(model, scaling, runs)).toBe(best);
    expect([WINDOW_GRID[0], WINDOW_GRID.at(-1)]).not.toContain(best);
  });
  it("leaves out windows longer than every run", () => {
    const short = noisy(0.01, 0, 3, 0.6);
    expect(chooseWindow(model, scaling, short)).toBe(0.5);
    expect(chooseWindow(model, scaling, [])).toBe(WINDOW_GRID[0]);
  });
});

describe("the scale of a channel", () => {
  it("is the mean peak of the runs that hold a window", () => {
    expect(channelScales([Float64Array.of(1, 4), null, Float64Array.of(3, 0)])).toEqual([2, 2]);
    expect(channelScales([null])).toEqual([]);
  });
  it("is the least positive number where nothing is left over, so that any leftover counts", () => {
    expect(channelScales([Float64Array.of(0)])).toEqual([Number.MIN_VALUE]);
  });
});
