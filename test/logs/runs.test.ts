// What intake makes of runs, against brute force and tables small enough to count by hand.
import { mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { afterAll, describe, expect, it } from "vitest";
import { checkRanges } from "../../src/logs/checkRanges.js";
import { coverageOf } from "../../src/logs/coverage.js";
import { cutRuns } from "../../src/logs/cutRuns.js";
import { intakeLogs } from "../../src/logs/intake.js";
import type { LogTable } from "../../src/logs/logTable.js";
import type { Run } from "../../src/logs/recording.js";
import { readSavedTable, writeTable } from "../../src/logs/savedTable.js";
import { supportOf } from "../../src/logs/support.js";
import { seededRandom } from "../../src/num/random.js";
import type { Plant } from "../../src/plant/plant.js";
import { plantScaling } from "../../src/plant/scaling.js";
import { CRANE } from "../plant/examples.js";
import { plantOf } from "../plant/reading.js";

const folder = mkdtempSync(join(tmpdir(), "runs-"));
afterAll(() => rmSync(folder, { recursive: true }));

/** sway 12 deg, swayRate 15 deg/s, trolleySpeed 1.5 m/s, accel 0.5 m/s^2; what is unknown depends on sway and swayRate. */
const crane = plantOf(CRANE);
const perRun: Plant = { ...crane, logs: { ...crane.logs, run: "run" } };
const DEGREE = Math.PI / 180;

function tableOf(runs: readonly string[], time: readonly number[], sway = (_: number): number => 1): LogTable {
  const column = (of: (k: number) => number): Float64Array => Float64Array.from(time, (_, k) => of(k));
  const columns = new Map([
    ["time", Float64Array.from(time)],
    ["trolley", column((k) => k)],
    ["trolleySpeed", column(() => 0.5)],
    ["sway", column(sway)],
    ["swayRate", column(() => 2)],
    ["accel", column((k) => 0.1 * (k % 3))],
  ]);
  return { file: "hand.csv", rows: time.length, columns, runs };
}

/** Samples of (trolley, trolleySpeed, sway, swayRate), SI. */
function runOf(
  samples: readonly (readonly number[])[],
  inputs: readonly number[] = samples.map((_, k) => 0.1 * (k % 2)),
): Run {
  const time = Float64Array.from(samples, (_, k) => 0.02 * k);
  return {
    id: "1",
    file: "hand.csv",
    pieces: [{ time, states: Float64Array.from(samples.flat()), inputs: Float64Array.from(inputs) }],
  };
}

describe("cutting", () => {
  it("puts the rows of one label together wherever they stand in the file", () => {
    const time = Array.from({ length: 40 }, (_, k) => 0.02 * (k >> 1));
    const { runs, findings } = cutRuns(
      perRun,
      tableOf(
        time.map((_, k) => (k % 2 === 0 ? "even" : "odd")),
        time,
      ),
    );
    expect(findings).toEqual([]);
    for (const [r, run] of runs.entries()) {
      expect(run.id).toBe(["even", "odd"][r]);
      expect(Array.from(run.pieces[0]!.time, (_, k) => run.pieces[0]!.states[4 * k])).toEqual(
        Array.from({ length: 20 }, (_, k) => 2 * k + r),
      );
    }
  });
  it("keeps a label that comes again, after another run or later in time, as pieces of one run", () => {
    const labels = [..."aaaaaaaaaaaabbbbbbbbbbbbaaaaaaaaaaaa"];
    const time = labels.map((_, k) => 0.02 * (k % 12) + (k >= 24 ? 60 : 0));
    const { runs, findings } = cutRuns(perRun, tableOf(labels, time));
    expect(runs.map(({ id, pieces }) => [id, pieces.map((piece) => piece.time.length)])).toEqual([
      ["a", [12, 12]],
      ["b", [12]],
    ]);
    expect(findings.map(({ kind, run, row }) => [kind, run, row])).toEqual([["gap", "a", 25]]);
  });
  it("makes nothing of a clock that runs backwards, and says so", () => {
    const time = Array.from({ length: 30 }, (_, k) => -0.02 * k);
    const { runs, findings } = cutRuns(
      perRun,
      tableOf(
        time.map(() => "a"),
        time,
      ),
    );
    expect(runs).toEqual([]);
    expect(findings.map(({ kind, count, row }) => [kind, count, row])).toEqual([
      ["timeStepsBack", 29, 2],
      ["shortPiece", 30, 1],
      ["runDropped", 30, 1],
    ]);
  });
  it("takes a step of just the longest gap as no gap, and ten samples as enough", () => {
    const gap = 0.125;
    const exact: Plant = { ...perRun, logs: { ...perRun.logs, maxGap: gap } };
    const time = Array.from({ length: 10 }, (_, k) => gap * k);
    const { runs, findings } = cutRuns(
      exact,
      tableOf(
        time.map(() => "a"),
        time,
      ),
    );
    expect([runs[0]!.pieces.length, findings]).toEqual([1, []]);
    const nine = cutRuns(
      exact,
      tableOf(
        time.slice(1).map(() => "a"),
        time.slice(1),
      ),
    );
    expect(nine.runs).toEqual([]);
  });
  it("bridges a row without numbers only as far as the longest gap", () => {
    const time = Array.from({ length: 30 }, (_, k) => 0.04 * k);
    const hole = (rows: readonly number[]) =>
      cutRuns(
        perRun,
        tableOf(
          time.map(() => "a"),
          time,
          (k) => (rows.includes(k) ? Number.POSITIVE_INFINITY : 1),
        ),
      );
    expect(hole([15]).runs[0]!.pieces.map((piece) => piece.time.length)).toEqual([29]);
    expect(hole([15, 16]).runs[0]!.pieces.map((piece) => piece.time.length)).toEqual([15, 13]);
    expect(hole([15, 16]).findings.map(({ kind, count, row }) => [kind, count, row])).toEqual([
      ["missingValues", 2, 16],
      ["gap", 1, 18],
    ]);
  });
});

describe("intake", () => {
  it("gives the median step and the 99th percentile of its deviation, over all runs", async () => {
    // 100 steps: 89 of 20 ms, 9 of 21 ms, 2 of 30 ms; shuffled, so that neither the first nor the last is typical
    const steps = Array.from({ length: 100 }, (_, k) => (k % 50 === 0 ? 0.03 : k % 11 === 5 ? 0.021 : 0.02));
    let now = 0;
    const stamps = [
      0,
      ...steps.map((step) => {
        now += step;
        return now;
      }),
    ];
    const lines = stamps.map((t, k) => [t.toFixed(3), 20, 0.5, 5, 2, 0.1 * (k % 3)].join(","));
    const path = join(folder, "steps.csv");
    writeFileSync(path, ["time,trolley,trolleySpeed,sway,swayRate,accel", ...lines].join("\n"));
    const found = await intakeLogs({ ...crane, logs: { ...crane.logs, files: [path] } });
    expect(found.files).toEqual([{ path, rows: 101, runs: 1 }]);
    expect(found.findings).toEqual([]);
    expect(found.sampleInterval).toBeCloseTo(0.02, 9);
    expect(found.jitter).toBeCloseTo(0.01, 9);
  });
});

describe("ranges", () => {
  const at = (sway: number, count: number): number[][] =>
    Array.from({ length: count }, () => [20, 0.5, sway * DEGREE, 1 * DEGREE]);
  it("count what is outside the envelope and how far, in the plant's units", () => {
    const findings = checkRanges(crane, "hand.csv", [runOf([...at(11, 15), ...at(13.5, 4), ...at(-14, 1)])]);
    expect(findings.map(({ kind, count }) => [kind, count])).toEqual([["outsideEnvelope", 5]]);
    expect(findings[0]!.text).toMatch(/'sway' is outside its envelope in 25 % of the samples, by at most 2\.00 deg/);
  });
  it("take degrees read as radians for a wrong unit, and the face of the envelope for inside", () => {
    const { min, max } = crane.states[2]!;
    const faces = [min, max].map((sway) => [20, 0.5, sway, 0.01]);
    expect(checkRanges(crane, "hand.csv", [runOf(faces)])).toEqual([]);
    const wrong = checkRanges(crane, "hand.csv", [runOf(at(10 / DEGREE, 20))]);
    expect(wrong.map(({ kind }) => kind)).toEqual(["scale", "outsideEnvelope"]);
    expect(wrong[0]!.text).toMatch(/48 times .*degrees read as radians/);
  });
  it("say that an input never moves", () => {
    const still = runOf(at(1, 12), new Array<number>(12).fill(0.3));
    expect(checkRanges(crane, "hand.csv", [still]).map(({ kind }) => kind)).toEqual(["constantInput"]);
  });
});

describe("coverage and support", () => {
  const { stateCenter, stateHalf } = plantScaling(crane);
  const random = seededRandom(8);
  const samples = Array.from({ length: 300 }, () =>
    Array.from({ length: 4 }, (_, i) => stateCenter[i]! + stateHalf[i]! * (1.1 * random.uniform() - 1)),
  );
  it("coverage counts every sample once; both faces of the envelope are inside", () => {
    const faces = [-1.5, 1.5, 1.501, -1.501].map((speed) => [20, speed, 0, 0]);
    const speed = coverageOf(crane, [runOf(faces)]).find(({ name }) => name === "trolleySpeed")!;
    expect([speed.counts[0], speed.counts.at(-1), speed.outside]).toEqual([1, 1, 2]);
    const sway = coverageOf(crane, [runOf(faces)]).find(({ name }) => name === "sway")!;
    expect(sway.unit).toBe("deg");
    for (const [b, edge] of sway.edges.entries()) expect(edge).toBeCloseTo(b - 12, 10);
    for (const state of coverageOf(crane, [runOf(samples)])) {
      expect(state.counts.reduce((sum, count) => sum + count, state.outside)).toBe(300);
    }
  });
  it("support is the distance to the nearest sample, exact up to the radius", () => {
    const support = supportOf(crane, [runOf(samples)]);
    expect(support.states).toEqual([2, 3]);
    let [near, far] = [0, 0];
    for (let p = 0; p < 400; p++) {
      const z = Float64Array.from({ length: 4 }, () => 2 * random.uniform() - 1);
      const truth = Math.min(
        ...samples.map((x) => Math.hypot(...[2, 3].map((i) => (x[i]! - stateCenter[i]!) / stateHalf[i]! - z[i]!))),
      );
      if (truth <= support.radius) {
        near++;
        expect(support.distance(z)).toBeCloseTo(truth, 12);
      } else {
        far++;
        expect(support.distance(z)).toBeGreaterThan(support.radius);
      }
    }
    expect(Math.min(near, far)).toBeGreaterThan(20);
    // 400 random points against 4096 of low discrepancy: four binomial standard deviations
    const share = far / 400;
    expect(Math.abs(support.unsupportedShare - share)).toBeLessThan(4 * Math.sqrt((share * (1 - share)) / 400));
  });
  it("support asks for no log where nothing is unknown", () => {
    const known: Plant = { ...crane, unknowns: [] };
    expect(supportOf(known, []).unsupportedShare).toBe(0);
    expect(supportOf(crane, []).unsupportedShare).toBe(1);
  });
});

it("saved tables read back whole, also when two columns are one array", () => {
  const path = join(folder, "shared.arrow");
  const values = Float64Array.of(1, Number.NaN, -0);
  const words = ["a", "", "ü"];
  writeTable(
    path,
    [
      { name: "first", unit: "m", values },
      { name: "again", unit: "m", values },
      { name: "words", unit: "", values: words },
    ],
    {},
  );
  expect([...readSavedTable(path)]).toEqual([
    ["first", values],
    ["again", values],
    ["words", words],
  ]);
});
