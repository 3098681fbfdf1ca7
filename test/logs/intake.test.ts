// Logs written by the test, with faults whose place is known.
import { mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import {
  Dictionary,
  Float32,
  Int32,
  makeData,
  Table,
  tableFromArrays,
  tableToIPC,
  Utf8,
  Vector,
  vectorFromArray,
} from "apache-arrow";
import { afterAll, describe, expect, it } from "vitest";
import { coverageOf } from "../../src/logs/coverage.js";
import { intakeLogs } from "../../src/logs/intake.js";
import { readTable } from "../../src/logs/readTable.js";
import { readSavedTable, writeTable } from "../../src/logs/savedTable.js";
import { splitRuns } from "../../src/logs/splitRuns.js";
import { supportOf } from "../../src/logs/support.js";
import { seededRandom } from "../../src/num/random.js";
import type { Plant } from "../../src/plant/plant.js";
import { readPlant } from "../../src/plant/readPlant.js";

const folder = mkdtempSync(join(tmpdir(), "logs-"));
afterAll(() => rmSync(folder, { recursive: true }));
const at = (name: string): string => join(folder, name);

function plantFor(files: readonly string[], more = ""): Plant {
  const text = `
plant: cart
states:
  place: { unit: m, envelope: [-30, 30] }
  angle: { unit: deg, envelope: [-180, 180] }
  speed: { unit: km/h, envelope: [-10, 10] }
inputs:
  accel: { unit: m/s^2, range: [-1, 2] }
rates: { place: speed, angle: 0.1 * speed, speed: accel }
unknown: [{ rate: speed, from: [speed] }]
leftover:
  push: { unit: m/s^2, on: { speed: 1 } }
symmetry: { translation: [place, angle] }
logs: { files: [${files.join(", ")}], run: run, maxGap: 0.15${more} }
margin: { minimise: place }
`;
  const result = readPlant(text, at("plant.yaml"));
  if (!result.ok) throw new Error(result.problems.map(({ message }) => message).join("\n"));
  return result.plant;
}

interface Row {
  run: string | number;
  time: number | string;
  place: number | string;
  angle: number | string;
  speed: number | string;
  accel: number | string;
}

function rowsOf(runs: number, samples: number): Row[] {
  return Array.from({ length: runs * samples }, (_, k) => {
    const [run, i] = [Math.floor(k / samples) + 1, k % samples];
    return {
      run,
      time: 0.1 * i,
      place: i,
      angle: ((i * 7 + 180) % 360) - 180,
      speed: (i % 18) - 9,
      accel: (i % 3) - 1,
    };
  });
}

const COLUMNS = ["run", "time", "place", "angle", "speed", "accel"] as const;
function csv(name: string, rows: readonly Row[], newline = "\n"): string {
  const lines = [COLUMNS.join(","), ...rows.map((row) => COLUMNS.map((column) => row[column]).join(","))];
  writeFileSync(at(name), lines.join(newline) + newline);
  return name;
}

async function findingsOf(name: string, more = "") {
  const { findings, runs } = await intakeLogs(plantFor([name], more));
  return { runs, kinds: findings.map(({ kind, run, count, row }) => ({ kind, run, count, row })) };
}

/** Columns as they are, whatever their type. */
function tableOf(columns: Readonly<Record<string, Vector | Float32Array | Float64Array | Int32Array>>): Table {
  return new Table(
    Object.fromEntries(
      Object.entries(columns).map(([name, values]) => [
        name,
        values instanceof Vector ? values : vectorFromArray(values),
      ]),
    ),
  );
}

describe("reading logs", () => {
  it("converts units, unwraps angles and keeps runs apart", async () => {
    const { runs, kinds } = await findingsOf(csv("clean.csv", rowsOf(3, 40)));
    expect(kinds).toEqual([]);
    expect(runs.map(({ id, pieces }) => [id, pieces.length, pieces[0]!.time.length])).toEqual([
      ["1", 1, 40],
      ["2", 1, 40],
      ["3", 1, 40],
    ]);
    const { states, inputs, time } = runs[1]!.pieces[0]!;
    expect(time[7]).toBeCloseTo(0.7, 12);
    expect(inputs[7]).toBe((7 % 3) - 1);
    expect(states[7 * 3 + 2]).toBeCloseTo(((7 % 18) - 9) / 3.6, 12);
    // 7 deg a sample without a jump at the turn
    for (let k = 1; k < 40; k++) {
      expect(states[k * 3 + 1]! - states[(k - 1) * 3 + 1]!).toBeCloseTo((7 * Math.PI) / 180, 10);
    }
  });
  it("reads the same numbers from CSV with CR LF, a byte-order mark and quotes, and from Arrow file and stream", async () => {
    const rows = rowsOf(2, 20);
    const wanted = { numbers: ["time", "place", "angle", "speed", "accel"], run: "run" };
    const plain = await readTable(at(csv("plain.csv", rows)), wanted);
    csv("crlf.csv", rows, "\r\n");
    writeFileSync(
      at("quoted.csv"),
      `\ufeff${["run", ...wanted.numbers, "note"].join(",")}\n${rows
        .map((row) => [`"${row.run}"`, ...wanted.numbers.map((name) => row[name as keyof Row]), '"a, b"'].join(","))
        .join("\n")}\n`,
    );
    const numbers = Object.fromEntries(
      wanted.numbers.map((name) => [name, Float64Array.from(rows, (row) => Number(row[name as keyof Row]))]),
    );
    const words = vectorFromArray(
      rows.map(({ run }) => String(run)),
      new Dictionary(new Utf8(), new Int32()),
    );
    const table = tableOf({ ...numbers, run: words });
    writeFileSync(at("log.arrow"), tableToIPC(table, "file"));
    writeFileSync(at("log.arrows"), tableToIPC(table, "stream"));
    for (const name of ["crlf.csv", "quoted.csv", "log.arrow", "log.arrows"]) {
      const read = await readTable(at(name), wanted);
      expect(read.runs, name).toEqual(plain.runs);
      for (const column of wanted.numbers) expect(read.columns.get(column), name).toEqual(plain.columns.get(column));
    }
  });
  it("reads 32-bit columns and nulls as missing values", async () => {
    const time = Float32Array.from({ length: 20 }, (_, k) => k / 8);
    const table = tableOf({
      time,
      place: Int32Array.from(time, (_, k) => k),
      angle: time,
      speed: vectorFromArray([null, ...Array.from(time).slice(1)], new Float32()),
      accel: new Vector([makeData({ type: new Float32(), data: new Float32Array(20) })]),
      run: vectorFromArray(Array.from({ length: 20 }, () => 4)),
    });
    writeFileSync(at("narrow.arrow"), tableToIPC(table, "file"));
    const { runs, kinds } = await findingsOf("narrow.arrow");
    expect(kinds[0]).toEqual({ kind: "missingValues", run: "4", count: 1, row: 1 });
    expect(runs[0]!.pieces[0]!.time.length).toBe(19);
    expect(kinds.some(({ kind }) => kind === "constantInput")).toBe(true);
  });
});

describe("faults in logs", () => {
  const spoilt = (name: string, change: (rows: Row[]) => Row[]) => csv(name, change(rowsOf(2, 60)));
  it("cuts at a gap, at a step back, and drops what repeats or is missing, each with its first row", async () => {
    const name = spoilt("faults.csv", (rows) => {
      for (let k = 30; k < 60; k++) rows[k]!.time = Number(rows[k]!.time) + 5;
      rows[45]!.time = rows[44]!.time;
      rows[50]!.speed = "";
      rows[70]!.place = "NaN";
      for (let k = 90; k < 120; k++) rows[k]!.time = Number(rows[k]!.time) - 2;
      return rows;
    });
    const { runs, kinds } = await findingsOf(name);
    expect(kinds).toEqual([
      { kind: "missingValues", run: "1", count: 1, row: 51 },
      { kind: "repeatedStamps", run: "1", count: 1, row: 46 },
      { kind: "gap", run: "1", count: 3, row: 31 },
      { kind: "shortPiece", run: "1", count: 2, row: 47 },
      { kind: "missingValues", run: "2", count: 1, row: 71 },
      { kind: "timeStepsBack", run: "2", count: 1, row: 91 },
      { kind: "gap", run: "2", count: 1, row: 72 },
    ]);
    expect(runs[0]!.pieces.map(({ time }) => time.length)).toEqual([30, 15]);
    expect(runs[1]!.pieces.map(({ time }) => time.length)).toEqual([10, 19, 30]);
  });
  it("names a wrong unit, values outside, and an input beyond its range", async () => {
    const radians = spoilt("radians.csv", (rows) =>
      rows.map((row) => ({ ...row, speed: Number(row.speed) * 60, accel: Number(row.accel) * 3 })),
    );
    const { kinds } = await findingsOf(radians, "");
    expect(kinds.map(({ kind }) => kind)).toEqual(["scale", "outsideEnvelope", "inputOutsideRange"]);
    // an angle with an envelope is not unwrapped, so degrees read as radians stay visible
    const degrees = plantFor(["clean.csv"], ", columns: { angle: { column: angle, unit: rad } }");
    const bounded = { ...degrees, symmetry: { ...degrees.symmetry, translation: [0] } };
    expect((await intakeLogs(bounded)).findings.map(({ kind }) => kind)).toContain("scale");
  });
  it("drops a run that is too short, and refuses a log without a usable one", async () => {
    const { runs, kinds } = await findingsOf(spoilt("short.csv", (rows) => rows.slice(0, 65)));
    expect(runs.map(({ id }) => id)).toEqual(["1"]);
    expect(kinds.filter(({ kind }) => kind === "runDropped")).toEqual([
      { kind: "runDropped", run: "2", count: 5, row: 61 },
    ]);
    await expect(intakeLogs(plantFor([csv("none.csv", rowsOf(1, 5))]))).rejects.toThrow(/no usable run/);
  });
  it.each([
    ["empty.csv", "", /empty\.csv: is empty/],
    ["header.csv", "run,time,place,angle,speed,accel\n", /has a header but no rows/],
    ["missing.csv", "run,time,place,angle,speed\n1,0,0,0,0\n", /has no column 'accel'; it has 'run', 'time'/],
    [
      "text.csv",
      "run,time,place,angle,speed,accel\n1,0,0,0,0,0\n1,0.1,x,0,0,0\n",
      /text\.csv:3: 'x' in column 'place'/,
    ],
    ["ragged.csv", "run,time,place,angle,speed,accel\n1,0,0\n", /ragged\.csv.*not whole CSV/],
    ["broken.arrow", "ARROW1 and then nothing", /is not a whole Arrow IPC file or stream|holds no rows/],
    ["log.bag", "x", /its ending names no container/],
  ])("refuses %s by name", async (name, text, message) => {
    writeFileSync(at(name), text);
    await expect(intakeLogs(plantFor([name]))).rejects.toThrow(message);
    await expect(intakeLogs(plantFor([name]))).rejects.toThrow(at(name));
  });
  it("refuses a file that is not there, and an Arrow file that was cut", async () => {
    await expect(intakeLogs(plantFor(["nowhere.csv"]))).rejects.toThrow(/nowhere\.csv.*no such file/);
    const whole = tableToIPC(
      tableFromArrays({ ...Object.fromEntries(COLUMNS.map((name) => [name, new Float64Array(4000)])) }),
      "file",
    );
    for (const share of [0.2, 0.5, 0.9]) {
      writeFileSync(at("cut.arrow"), whole.slice(0, Math.floor(share * whole.length)));
      await expect(intakeLogs(plantFor(["cut.arrow"]))).rejects.toThrow(/cut\.arrow/);
    }
  });
});

describe("runs as later stages use them", () => {
  it("are split by run, all of them once, the same for one seed", async () => {
    const { runs } = await intakeLogs(plantFor([csv("many.csv", rowsOf(20, 12))]));
    const shares = { fit: 0.5, calibration: 0.3, test: 0.2 };
    const split = splitRuns(runs, shares, seededRandom(3));
    expect([split.fit.length, split.calibration.length, split.test.length]).toEqual([10, 6, 4]);
    const ids = [...split.fit, ...split.calibration, ...split.test].map(({ id }) => id);
    expect(new Set(ids).size).toBe(20);
    expect(splitRuns(runs, shares, seededRandom(3))).toEqual(split);
    expect(splitRuns(runs, shares, seededRandom(4))).not.toEqual(split);
    expect(() => splitRuns(runs.slice(0, 3), shares, seededRandom(3))).toThrow(/at least 5 are needed/);
  });
  it("support what lies near a sample, and nothing else", async () => {
    const slow = rowsOf(1, 60).map((row) => ({ ...row, speed: Number(row.speed) > 0 ? -1 : row.speed }));
    const { runs } = await intakeLogs(plantFor([csv("slow.csv", slow)]));
    const support = supportOf(plantFor(["slow.csv"]), runs);
    // samples at -9 .. 0 of -10 .. 10: all from -1 to 0 + radius of the scaled speed lie near one
    expect(support.distance(Float64Array.of(0, 0, -0.5))).toBeLessThan(0.051);
    expect(support.distance(Float64Array.of(0, 0, 0.9))).toBe(Number.POSITIVE_INFINITY);
    expect(support.unsupportedShare).toBeCloseTo((1 - support.radius) / 2, 2);
    const [speed] = coverageOf(plantFor(["slow.csv"]), runs);
    expect(speed!.counts.reduce((a, b) => a + b)).toBe(60);
    expect(speed!.counts.slice(13).every((count) => count === 0)).toBe(true);
  });
  it("are saved and read back as they were", () => {
    const columns = [
      { name: "word", unit: "", values: ["a", "bc", ""] },
      { name: "value", unit: "m", values: Float64Array.of(1, -0.1, 1e300) },
    ];
    writeTable(at("saved.arrow"), columns, { fact: "x" });
    expect([...readSavedTable(at("saved.arrow"))]).toEqual(columns.map(({ name, values }) => [name, values]));
    writeFileSync(at("half.arrow"), "not a table");
    expect(() => readSavedTable(at("half.arrow"))).toThrow(/not a whole table/);
  });
});
