import { mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { afterAll, describe, expect, it } from "vitest";
import { LogError } from "../../src/logs/logError.js";
import { readPlan } from "../../src/logs/readPlan.js";
import { writeTable } from "../../src/logs/savedTable.js";
import type { Plant } from "../../src/plant/plant.js";
import { ROVER } from "../plant/examples.js";
import { plantOf } from "../plant/reading.js";

const folder = mkdtempSync(join(tmpdir(), "plan-"));
afterAll(() => rmSync(folder, { recursive: true }));
const plant: Plant = plantOf(ROVER);

/** Twelve rows; heading steps over pi. In the logs 'yaw' is in rad, in the plant file 'heading' in deg. */
const COUNT = 12;
const heading = (k: number): number => 3 + 0.05 * k;
const wrapped = (angle: number): number => Math.atan2(Math.sin(angle), Math.cos(angle));
const values: Readonly<Record<string, (k: number) => number>> = {
  time: (k) => 5 + 0.2 * k,
  px: (k) => k,
  py: (k) => -k,
  yaw: (k) => wrapped(heading(k)),
  heading: (k) => (wrapped(heading(k)) * 180) / Math.PI,
  speed: () => 1.5,
  drive: (k) => 0.1 * k,
  turn: () => 0.25,
};
const AS_LOGS = ["time", "px", "py", "yaw", "speed", "drive", "turn"];
const BY_NAME = ["time", "px", "py", "heading", "speed", "drive", "turn"];

function csv(name: string, columns: readonly string[], change: (rows: string[][]) => void = () => undefined): string {
  const rows = Array.from({ length: COUNT }, (_, k) => columns.map((column) => String(values[column]!(k))));
  change(rows);
  const path = join(folder, name);
  writeFileSync(path, [columns.join(","), ...rows.map((row) => row.join(","))].join("\n"));
  return path;
}

async function fault(path: string): Promise<string> {
  const error = await readPlan(plant, path).then(
    () => null,
    (thrown: unknown) => thrown,
  );
  expect(error).toBeInstanceOf(LogError);
  return (error as LogError).message;
}

describe("reading a plan", () => {
  it("takes the columns and units of the logs, or the plant's own names and units", async () => {
    const [asLogs, byName] = [
      await readPlan(plant, csv("a.csv", AS_LOGS)),
      await readPlan(plant, csv("b.csv", BY_NAME)),
    ];
    for (let k = 0; k < COUNT; k++) {
      const row = [k, -k, heading(k), 1.5];
      for (const [i, value] of row.entries()) {
        expect(asLogs.states[k * 4 + i]).toBeCloseTo(value, 12);
        expect(byName.states[k * 4 + i]).toBeCloseTo(value, 12);
      }
      expect(asLogs.inputs[k * 2]).toBeCloseTo(0.1 * k, 12);
      expect(asLogs.time[k]).toBeCloseTo(5 + 0.2 * k, 12);
    }
    expect(asLogs.file).toBe(join(folder, "a.csv"));
  });

  it("reads a time step longer than a log's gap as a coarse plan", async () => {
    const path = csv("coarse.csv", AS_LOGS, (rows) =>
      rows.forEach((row, k) => {
        row[0] = String(k);
      }),
    );
    expect(Array.from((await readPlan(plant, path)).time)).toEqual(Array.from({ length: COUNT }, (_, k) => k));
  });

  it("reads Arrow", async () => {
    const path = join(folder, "plan.arrow");
    writeTable(
      path,
      AS_LOGS.map((name) => ({
        name,
        unit: "",
        values: Float64Array.from({ length: COUNT }, (_, k) => values[name]!(k)),
      })),
      {},
    );
    const [arrow, text] = [await readPlan(plant, path), await readPlan(plant, csv("c.csv", AS_LOGS))];
    expect(arrow.states).toEqual(text.states);
    expect(arrow.inputs).toEqual(text.inputs);
  });

  it("names both ways when a column is missing", async () => {
    const message = await fault(csv("short.csv", AS_LOGS.slice(0, -1)));
    expect(message).toContain("the columns of the logs (time, px, py, yaw, speed, drive, turn)");
    expect(message).toContain("the plant file's names (time, px, py, heading, speed, drive, turn)");
    expect(message).toContain("has no column 'turn'");
  });

  it("names row and column of what is no number, of a hole and of time that does not rise", async () => {
    expect(
      await fault(
        csv("text.csv", AS_LOGS, (rows) => {
          rows[3]![4] = "fast";
        }),
      ),
    ).toMatch(/text\.csv:5: 'fast' in column 'speed'/);
    expect(
      await fault(
        csv("hole.csv", BY_NAME, (rows) => {
          rows[6]![5] = "";
        }),
      ),
    ).toMatch(/hole\.csv: row 7 of its numbers \('drive' is NaN\)/);
    expect(
      await fault(
        csv("back.csv", AS_LOGS, (rows) => {
          rows[5]![0] = "5.7";
        }),
      ),
    ).toMatch(/row 6 of its numbers: time steps back/);
    expect(
      await fault(
        csv("twice.csv", AS_LOGS, (rows) => {
          rows[5]![0] = rows[4]![0]!;
        }),
      ),
    ).toMatch(/row 6 of its numbers: rows that repeat a stamp/);
    expect(await fault(csv("few.csv", AS_LOGS, (rows) => rows.splice(4)))).toMatch(/fewer than 10 samples/);
  });

  it("refuses a file that is not there or of an unknown kind", async () => {
    expect(await fault(join(folder, "none.csv"))).toMatch(/none\.csv: no such file; a plan/);
    writeFileSync(join(folder, "plan.txt"), "x");
    expect(await fault(join(folder, "plan.txt"))).toMatch(/names no container/);
  });
});
