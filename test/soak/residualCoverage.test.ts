// Does the disturbance bound keep its word? Fleets of simulated runs of an invented carriage with a disturbance that is
// known; in each fleet a bound from noisy logs, then one fresh run whose true window means must stay under it throughout.
// Over fleets the share that do is binomial: its one-sided 99 % Clopper-Pearson limit must not contradict the level.
// The figures go to test/bench/residualCoverage.json.
import { writeFileSync } from "node:fs";
import { resolve } from "node:path";
import { afterAll, beforeAll, describe, expect, it } from "vitest";
import { rungeKutta } from "../../data/make/simulate.js";
import { type Engine, openEngine } from "../../src/engine/openEngine.js";
import type { Run } from "../../src/logs/recording.js";
import type { ControlAffineModel } from "../../src/model/controlAffine.js";
import { fittedModel } from "../../src/model/fittedModel.js";
import { type Random, seededRandom } from "../../src/num/random.js";
import { clopperPearsonLower, clopperPearsonUpper, conformalRank } from "../../src/num/statistics.js";
import type { Plant } from "../../src/plant/plant.js";
import { plantScaling } from "../../src/plant/scaling.js";
import { chooseWindow } from "../../src/residual/chooseWindow.js";
import { type DisturbanceBound, disturbanceBound, runPeaks } from "../../src/residual/disturbanceBound.js";
import { fitResidual } from "../../src/residual/fitResidual.js";
import { plantOf } from "../plant/reading.js";

const FLEETS = 200;
const FITTED_FLEETS = 30;
const RUNS = { fit: 16, calibration: 24 };
const STEP = 0.02;
const SECONDS = 10;
const LEVEL = 0.9;
/** Sensor noise of the place (m) and the speed (m/s). */
const NOISE = [0.0005, 0.001] as const;
/** 1/s: a contraction rate to judge the tube by. */
const RATE = 1.3;

const carriage = (speed: string, unknown: string): Plant =>
  plantOf(`
plant: carriage
states:
  place: { unit: m, envelope: [-10, 10] }
  speed: { unit: m/s, envelope: [-1, 1] }
inputs:
  accel: { unit: m/s^2, range: [-1, 1] }
rates:
  place: speed
  speed: ${speed}
unknown: ${unknown}
leftover:
  slip: { unit: m/s, on: { place: 1 } }
  push: { unit: m/s^2, on: { speed: 1 } }
logs: { files: [made-up.csv] }
margin: { minimise: place }
networks: { residual: { width: 8, steps: 300 } }
`);
const known = carriage("accel - 0.4 * speed", "[]");
const halfKnown = carriage("accel", "[{ rate: speed, from: [speed] }]");

/** One leftover channel: a few slow sines, its size another in every run. */
interface Signal {
  readonly at: (t: number) => number;
  /** Mean over [from, to], in closed form. */
  readonly mean: (from: number, to: number) => number;
}

function signal(bound: number, random: Random): Signal {
  const size = bound * (0.3 + 0.7 * random.uniform());
  const parts = Array.from({ length: 3 }, () => ({
    share: (size / 3) * (0.5 + 0.5 * random.uniform()),
    pace: 2 * Math.PI * (0.02 + 0.3 * random.uniform()),
    phase: 2 * Math.PI * random.uniform(),
  }));
  const sum = (value: (part: (typeof parts)[number]) => number): number =>
    parts.reduce((total, part) => total + value(part), 0);
  return {
    at: (t) => sum(({ share, pace, phase }) => share * Math.sin(pace * t + phase)),
    mean: (from, to) =>
      sum(
        ({ share, pace, phase }) =>
          (share * (Math.cos(pace * from + phase) - Math.cos(pace * to + phase))) / (pace * (to - from)),
      ),
  };
}

interface Recorded {
  readonly measured: Run;
  readonly exact: Run;
  readonly leftover: readonly [Signal, Signal];
}

function record(id: string, random: Random): Recorded {
  const leftover = [signal(0.02, random), signal(0.05, random)] as const;
  const count = Math.round(SECONDS / STEP) + 1;
  const time = Float64Array.from({ length: count }, (_, k) => k * STEP);
  const [measured, exact] = [new Float64Array(2 * count), new Float64Array(2 * count)];
  const inputs = new Float64Array(count);
  let x = [0, 1.6 * random.uniform() - 0.8];
  let [goal, until] = [0, 0];
  for (const [k, t] of time.entries()) {
    if (t >= until) [goal, until] = [1.6 * random.uniform() - 0.8, t + 1 + 2 * random.uniform()];
    const accel = Math.min(1, Math.max(-1, 1.5 * (goal - x[1]!) + 0.4 * x[1]!));
    inputs[k] = accel;
    for (const [i, value] of x.entries()) {
      exact[2 * k + i] = value;
      measured[2 * k + i] = value + NOISE[i]! * random.normal();
    }
    x = rungeKutta((at, [, s]) => [s! + leftover[0].at(at), accel - 0.4 * s! + leftover[1].at(at)], t, x, STEP);
  }
  const runOf = (states: Float64Array): Run => ({ id, file: "made-up.csv", pieces: [{ time, states, inputs }] });
  return { measured: runOf(measured), exact: runOf(exact), leftover };
}

interface Fleet {
  readonly bound: DisturbanceBound;
  readonly model: ControlAffineModel;
  readonly calibration: readonly Recorded[];
  readonly fresh: Recorded;
}

async function fleet(index: number, engine: Engine | null): Promise<Fleet> {
  const random = seededRandom(4000 + index).stream(engine === null ? "known" : "fitted");
  const draw = (count: number, part: string): Recorded[] =>
    Array.from({ length: count }, (_, i) => record(`${part}${i}`, random));
  const [fit, calibration, [fresh]] = [draw(RUNS.fit, "f"), draw(RUNS.calibration, "c"), draw(1, "n")];
  const logs = { fit: fit.map((run) => run.measured), calibration: calibration.map((run) => run.measured), test: [] };
  const plant = engine === null ? known : halfKnown;
  const learn = async (tools: Engine): Promise<ControlAffineModel> => {
    const services = { engine: tools, random, progress: () => undefined };
    return fittedModel(plant, (await fitResidual(plant, logs.fit, services)).residual);
  };
  const model = engine === null ? fittedModel(plant, null) : await learn(engine);
  const scaling = plantScaling(plant);
  const bound = disturbanceBound(model, scaling, logs, chooseWindow(model, scaling, logs.fit), LEVEL);
  if (bound.status !== "bounded") throw new Error(bound.status);
  return { bound, model, calibration, fresh: fresh! };
}

/** Largest true window mean of each channel, windows starting at a quarter of the log's step: never read from states. */
function truePeaks(leftover: readonly [Signal, Signal], window: number): number[] {
  return leftover.map(({ mean }) => {
    let peak = 0;
    for (let from = 0; from + window <= SECONDS + 1e-9; from += STEP / 4) {
      peak = Math.max(peak, Math.abs(mean(from, from + window)));
    }
    return peak;
  });
}

/** How far d' = -rate d + w strays, at most, from zero; classical Runge-Kutta. */
function strays({ at }: Signal): number {
  let [d, peak] = [[0], 0];
  for (let t = 0; t < SECONDS; t += STEP) {
    d = rungeKutta((now, [value]) => [at(now) - RATE * value!], t, d, STEP);
    peak = Math.max(peak, Math.abs(d[0]!));
  }
  return peak;
}

function shareOf(held: readonly boolean[]) {
  const covered = held.filter((value) => value).length;
  return {
    fleets: held.length,
    covered,
    share: covered / held.length,
    lower99: clopperPearsonLower(covered, held.length, 0.99),
    upper99: clopperPearsonUpper(covered, held.length, 0.99),
  };
}

const isUnder = (peaks: ArrayLike<number>, { bound }: DisturbanceBound): boolean =>
  bound.every((limit, c) => peaks[c]! <= limit);

const figures: Record<string, unknown> = {
  level: LEVEL,
  runs: RUNS,
  seconds: SECONDS,
  noise: NOISE,
  // the exact coverage of a fresh measured run: rank / (K + 1)
  exactLevel: conformalRank(RUNS.calibration, 1 - LEVEL)! / (RUNS.calibration + 1),
};
afterAll(() => {
  writeFileSync(
    resolve(import.meta.dirname, "../bench/residualCoverage.json"),
    `${JSON.stringify(figures, null, 2)}\n`,
  );
});

describe("coverage over fleets, the model known", () => {
  const fleets: Fleet[] = [];
  beforeAll(async () => {
    for (let i = 0; i < FLEETS; i++) fleets.push(await fleet(i, null));
  }, 600_000);

  it("true window means of a fresh run stay under the bound as often as promised", () => {
    const known = shareOf(fleets.map(({ bound, fresh }) => isUnder(truePeaks(fresh.leftover, bound.window), bound)));
    figures.trueMeans = known;
    expect(known.upper99).toBeGreaterThanOrEqual(LEVEL);
  });

  it("measured window means of a fresh run do so exactly as often as the rank says", () => {
    const measured = shareOf(
      fleets.map(({ bound, model, fresh }) =>
        isUnder(runPeaks(model, plantScaling(known), fresh.measured, bound.window)!, bound),
      ),
    );
    figures.measuredMeans = measured;
    expect(measured.upper99).toBeGreaterThanOrEqual(figures.exactLevel as number);
    expect(measured.lower99).toBeLessThanOrEqual(figures.exactLevel as number);
  });

  it("sensor noise only widens the bound", () => {
    // the same bound from the true means of the same runs, channel by channel
    const ratios = fleets.map(({ bound, calibration }) => {
      const scores = calibration.map(({ leftover }) =>
        Math.max(...truePeaks(leftover, bound.window).map((peak, c) => peak / bound.scale[c]!)),
      );
      return bound.quantile / scores.toSorted((a, b) => a - b)[bound.rank - 1]!;
    });
    const windows = fleets.map(({ bound }) => bound.window);
    figures.boundOverNoiseFree = { least: Math.min(...ratios), mean: ratios.reduce((a, b) => a + b) / ratios.length };
    figures.windows = Object.fromEntries(
      [...new Set(windows)].sort().map((w) => [w, windows.filter((x) => x === w).length]),
    );
    expect(ratios.reduce((a, b) => a + b) / ratios.length).toBeGreaterThan(1);
    expect(ratios.filter((ratio) => ratio < 0.98)).toEqual([]);
  });

  it("the window's factor keeps what the leftover does to a contracting error within the bound", () => {
    const uses = fleets.flatMap(({ bound, fresh }) =>
      fresh.leftover.map((channel, c) => {
        const factor = (RATE * bound.window) / -Math.expm1(-RATE * bound.window);
        return strays(channel) / ((bound.bound[c]! / RATE) * factor);
      }),
    );
    const tube = shareOf(fleets.map((_, i) => uses[2 * i]! <= 1 && uses[2 * i + 1]! <= 1));
    figures.tube = { ...tube, meanUse: uses.reduce((a, b) => a + b) / uses.length, largestUse: Math.max(...uses) };
    expect(tube.upper99).toBeGreaterThanOrEqual(LEVEL);
  });

  it("and the test can fail: half the bound does not cover", () => {
    const half = shareOf(
      fleets.map(({ bound, fresh }) =>
        isUnder(truePeaks(fresh.leftover, bound.window), { ...bound, bound: bound.bound.map((limit) => limit / 2) }),
      ),
    );
    figures.halfTheBound = half;
    expect(half.upper99).toBeLessThan(LEVEL);
  });
});

describe("coverage over fleets, the drag fitted from each fleet's own logs", () => {
  it("what the fitted model truly leaves on a fresh run stays under the bound as often as promised", async () => {
    const engine = await openEngine();
    const held: boolean[] = [];
    for (let i = 0; i < FITTED_FLEETS; i++) {
      const { bound, model, fresh } = await fleet(i, engine);
      held.push(isUnder(runPeaks(model, plantScaling(halfKnown), fresh.exact, bound.window)!, bound));
    }
    figures.fitted = shareOf(held);
    expect(shareOf(held).upper99).toBeGreaterThanOrEqual(LEVEL);
  });
});
