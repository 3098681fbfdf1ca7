// data/README.md against the files and against the truth that makes them; the simulator against its own promises.
import { createHash } from "node:crypto";
import { readFileSync } from "node:fs";
import { resolve } from "node:path";
import { tableFromIPC } from "apache-arrow";
import { describe, expect, it } from "vitest";
import { DATA_SETS, type DataSet } from "../../data/make/dataSets.js";
import { STEP, simulateRun } from "../../data/make/simulate.js";
import { seededRandom } from "../../src/num/random.js";

const data = resolve(import.meta.dirname, "../../data");
const readme = readFileSync(resolve(data, "README.md"), "utf8");
const named = DATA_SETS.map((set) => [set.name, set] as const);
const setOf = (name: string): DataSet => DATA_SETS.find((set) => set.name === name)!;
/** The table lines of a text as cells, however they are aligned. */
const tableIn = (text: string): string[][] =>
  text
    .split("\n")
    .filter((line) => line.startsWith("|"))
    .map((line) =>
      line
        .split("|")
        .slice(1, -1)
        .map((cell) => cell.trim()),
    );
/** The tables of a plant: of the section whose last table compares the plant with itself after the change. */
const plantTables = (plant: string): string[][] =>
  readme
    .split(/^## /m)
    .map(tableIn)
    .find((lines) => lines.some(([first, second]) => first === "" && second === `\`${plant}\``))!;
const PLANTS = ["orchard-rover", "yard-crane", "survey-boat"];
const changeOf = (plant: string): DataSet => DATA_SETS.find((set) => set.name.startsWith(`${plant}-`))!;

describe("data/README.md", () => {
  it.each(named)("%s: runs, seconds, rows and SHA-256 are those of the file", (name) => {
    const bytes = readFileSync(resolve(data, `${name}.arrow`));
    const table = tableFromIPC(bytes);
    const runs = new Set(table.getChild("run")!.toArray() as Int16Array).size;
    const seconds = Math.max(...(table.getChild("time")!.toArray() as Float32Array));
    const hash = createHash("sha256").update(bytes).digest("hex");
    expect(tableIn(readme).filter(([first]) => first === `\`${name}.arrow\``)).toEqual([
      [`\`${name}.arrow\``, `${runs}`, `${seconds}`, `${table.numRows}`, `\`${hash}\``],
    ]);
  });
  it.each(named)("%s: every column of the file is listed with its unit and its noise", (name, { truth }) => {
    const lines = plantTables(name.split("-").slice(0, 2).join("-"));
    for (const field of tableFromIPC(readFileSync(resolve(data, `${name}.arrow`))).schema.fields) {
      const noise = truth.states.find((state) => state.name === field.name)?.noise;
      const line = lines.find(([first]) => first!.includes(`\`${field.name}\``));
      expect(line?.slice(1), field.name).toEqual([
        field.metadata.get("unit") ?? "",
        noise === undefined ? "" : `${noise}`,
      ]);
    }
  });
  it.each(PLANTS)("%s: the bounds of the disturbance are the true ones", (plant) => {
    const bounds = [setOf(plant), changeOf(plant)].map(({ truth }) => truth.disturbance.join(", "));
    expect(
      plantTables(plant)
        .find(([first]) => first!.startsWith("bounds of"))!
        .slice(1),
    ).toEqual(bounds);
  });
  it("gives the true rates of the rover", () => {
    const [along, across, drift, push] = [0.003, -0.002, 0.001, 0.01];
    for (const [name, drag, gain] of [
      ["orchard-rover", (v: number) => 0.12 + 0.09 * v ** 2, (v: number) => 1 / (1 + 0.12 * v ** 2)],
      ["orchard-rover-tank", (v: number) => 0.2 + 0.12 * v ** 2, (v: number) => 0.97 / (1 + 0.14 * v ** 2)],
    ] as const) {
      const [psi, v, drive, turn] = [0.7, 1.6, 0.4, -0.3];
      const rates = setOf(name).truth.rates([3, -2, psi, v], [drive, turn], [along, across, drift, push]);
      const expected = [
        (v + along) * Math.cos(psi) - across * Math.sin(psi),
        (v + along) * Math.sin(psi) + across * Math.cos(psi),
        gain(v) * turn + drift,
        drive - drag(v) + push,
      ];
      for (const [i, rate] of expected.entries()) expect(rates[i]).toBeCloseTo(rate, 12);
    }
  });
  it("gives the true rates of the crane", () => {
    for (const [name, rope, a, b] of [
      ["yard-crane", 6.8, 0.06, 0.2],
      ["yard-crane-hook", 7.4, 0.08, 0.28],
    ] as const) {
      const [speed, sway, rate, accel, drive, wind] = [0.4, 0.2, -0.15, 0.5, 0.004, -0.002];
      const rates = setOf(name).truth.rates([12, speed, sway, rate], [accel], [drive, wind]);
      const fall = -(9.80665 * Math.sin(sway) + accel * Math.cos(sway)) / rope;
      const damping = -a * rate - b * rate * Math.sqrt(rate ** 2 + 0.05 ** 2);
      for (const [i, truth] of [speed, accel + drive, rate, fall + damping + wind].entries())
        expect(rates[i]).toBeCloseTo(truth, 12);
    }
  });
  it("gives the true rates of the boat", () => {
    for (const [name, a, b, c, d, e, f] of [
      ["survey-boat", 0.16, 0.8, 1.1, 0.25, 0.9, 0.35],
      ["survey-boat-pod", 0.19, 0.86, 1.3, 0.29, 1.02, 0.39],
    ] as const) {
      const [psi, u, v, r, push, moment] = [-2.1, 1.3, 0.17, -0.22, 70, 25];
      const rates = setOf(name).truth.rates([1, 2, psi, u, v, r], [push, moment], [0.001, 0.002, 0.003]);
      const expected = [
        u * Math.cos(psi) - v * Math.sin(psi),
        u * Math.sin(psi) + v * Math.cos(psi),
        r,
        push / 120 - 0.12 * u - a * u ** 2 + b * v * r + 0.001,
        -0.7 * v - 0.5 * u * r - c * v * Math.sqrt(v ** 2 + 0.05 ** 2) - d * u * r + 0.002,
        moment / 50 - 0.8 * r - e * r * Math.sqrt(r ** 2 + 0.05 ** 2) - f * u * v + 0.003,
      ];
      for (const [i, rate] of expected.entries()) expect(rates[i]).toBeCloseTo(rate, 12);
    }
  });
});

describe("the simulator", () => {
  it.each(named)("%s: disturbances stay within bounds, inputs within ranges, noise is what it says", (_, { truth }) => {
    const random = seededRandom(77);
    const runs = Array.from({ length: 8 }, (_, r) => simulateRun(truth, 10, random.stream(`${r}`), r));
    const columns = (of: "inputs" | "disturbance", width: number, j: number): number[] =>
      runs.flatMap((run) => Array.from(run[of]).filter((_, at) => at % width === j));
    for (const [k, bound] of truth.disturbance.entries()) {
      const most = Math.max(...columns("disturbance", truth.disturbance.length, k).map(Math.abs));
      expect(most).toBeLessThanOrEqual(bound);
      expect(most).toBeGreaterThan(0.3 * bound);
    }
    for (const [j, { range }] of truth.inputs.entries()) {
      const values = columns("inputs", truth.inputs.length, j);
      expect(Math.min(...values)).toBeGreaterThanOrEqual(range[0]);
      expect(Math.max(...values)).toBeLessThanOrEqual(range[1]);
    }
    const n = truth.states.length;
    for (const [i, { noise }] of truth.states.entries()) {
      const errors = runs.flatMap((run) =>
        Array.from(run.time, (_, k) => {
          const error = run.measured[k * n + i]! - run.exact[k * n + i]!;
          return truth.states[i]!.wraps ? Math.atan2(Math.sin(error), Math.cos(error)) : error;
        }),
      );
      const sd = Math.sqrt(errors.reduce((sum, error) => sum + error * error, 0) / errors.length);
      // standard error of a standard deviation: 1 / sqrt(2 N); four of them
      expect(Math.abs(sd / noise - 1)).toBeLessThan(4 / Math.sqrt(2 * errors.length));
    }
  });
  it("follows a swing of known period: the crane's small, damped sway", () => {
    const { truth } = setOf("yard-crane");
    const [rope, sway0] = [6.8, 1e-4];
    // damping a = 0.06 1/s, and 0.05 b at small rates: x'' + (a + 0.05 b) x' + (g / rope) x = 0
    const half = (0.06 + 0.05 * 0.2) / 2;
    const omega = Math.sqrt(9.80665 / rope - half ** 2);
    const run = simulateRun(
      { ...truth, disturbance: [0, 0], start: () => [15, 0, sway0, 0], excitation: () => () => [0] },
      10,
      seededRandom(1),
      0,
    );
    for (const [k, time] of run.time.entries()) {
      const swing = Math.exp(-half * time) * (Math.cos(omega * time) + (half / omega) * Math.sin(omega * time));
      expect(Math.abs(run.exact[k * 4 + 2]! / sway0 - swing)).toBeLessThan(1e-5);
    }
    expect(run.time[1]).toBe(STEP);
  });
});
