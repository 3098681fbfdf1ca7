// Misuse and bad input by the real binary: status 2, the place or the option, what was given, what is allowed, no stack.
import { mkdirSync, readdirSync, readFileSync, writeFileSync } from "node:fs";
import { join } from "node:path";
import { describe, expect, it } from "vitest";
import { writeTable } from "../../src/logs/savedTable.js";
import { FAIRLEAD_VERSION } from "../../src/pipeline/version.js";
import { fairlead, plantFile, quickRover, ROOT, scratch, swapped } from "./binary.js";

const LOG = join(ROOT, "data/orchard-rover.arrow");

/** Runs it, wants status 2 and each piece in the message, and gives the message. */
async function refused(args: readonly string[], ...pieces: readonly RegExp[]): Promise<string> {
  const { status, out, err } = await fairlead(...args);
  expect(status, err).toBe(2);
  expect(out).toBe("");
  expect(err).not.toMatch(/^\s+at .*[:(]/m);
  expect(err.trim()).not.toBe("");
  for (const piece of pieces) expect(err).toMatch(piece);
  return err;
}

/** The quick rover with some text replaced, and perhaps a log of its own; arguments of its run. */
function runOf(swaps: readonly (readonly [string, string])[]): { args: string[]; folder: string; path: string } {
  const folder = scratch();
  const path = plantFile(folder, swapped(quickRover(), swaps));
  return { args: ["run", path, "--out", join(folder, "run"), "--quiet"], folder, path };
}

const COLUMNS = ["time", "px", "py", "heading", "speed", "drive", "turn"];

/** A log in CSV of a few runs in which nothing moves, each cell as `cell` says. */
function csv(runs: number, cell: (column: string, k: number) => string): string {
  const rows = Array.from({ length: runs }, (_, run) =>
    Array.from({ length: 200 }, (_, k) => [...COLUMNS.map((column) => cell(column, k)), `run ${run}`].join(",")),
  ).flat();
  return `${[...COLUMNS, "run"].join(",")}\n${rows.join("\n")}\n`;
}
const still = (column: string, k: number): string =>
  column === "time" ? String(0.05 * k) : column === "speed" ? String(1.5 + 0.3 * Math.sin(k / 9)) : "0.1";

describe("a plant file", () => {
  it("with a misspelt key: its place and the likely word", async () => {
    const { args, path } = runOf([["minimise:", "minimize:"]]);
    const line =
      readFileSync(path, "utf8")
        .split("\n")
        .findIndex((text) => text.includes("minimize")) + 1;
    const err = await refused(
      args,
      /unknown key 'minimize'/,
      /allowed are minimise, authority/,
      /did you mean 'minimise'/,
    );
    expect(err).toContain(`${path}:${line}:3: `);
  });

  it("with several mistakes: all of them", async () => {
    const { args } = runOf([
      ["minimise:", "minimize:"],
      ["confidence: 0.9", "confidence: 1.9"],
      ["px: speed * cos(heading)", "px: sped * cos(heading)"],
      ["unit: m/s^2, range", "unit: m/s^7, range"],
    ]);
    const err = await refused(args, /minimize/, /1\.9/, /sped/, /m\/s\^7/);
    expect(err.match(/plant\.yaml:\d+:\d+: /g)!.length).toBeGreaterThanOrEqual(4);
  });

  it("that is not there", () =>
    refused(["run", "/nowhere/plant.yaml", "--out", "/nowhere/run"], /\/nowhere\/plant\.yaml: no such file/));

  it("that is a folder", async () => {
    const folder = scratch();
    await refused(["run", folder, "--out", join(folder, "run")], /cannot be read/);
  });
});

describe("a log", () => {
  it("that is not there", () =>
    refused(runOf([[LOG, "/nowhere/log.arrow"]]).args, /\/nowhere\/log\.arrow: no such file/));

  it("without a column: the column, and those that there are", () =>
    refused(runOf([["{ column: heading, unit: rad }", "{ column: yaw, unit: rad }"]]).args, /yaw/, /speed/));

  it("that is cut", async () => {
    const { args, folder } = runOf([[LOG, "cut.arrow"]]);
    writeFileSync(join(folder, "cut.arrow"), readFileSync(LOG).subarray(0, 100_000));
    await refused(args, /cut\.arrow/);
  });

  it("that is not what its name says", async () => {
    const { args, folder } = runOf([[LOG, "text.arrow"]]);
    writeFileSync(join(folder, "text.arrow"), "time,px\n0,1\n");
    await refused(args, /text\.arrow/);
  });

  it("without a row", async () => {
    const { args, folder } = runOf([[LOG, "empty.arrow"]]);
    const columns = COLUMNS.map((name) => ({ name, unit: "", values: new Float64Array(0) }));
    writeTable(join(folder, "empty.arrow"), [...columns, { name: "run", unit: "", values: [] }], {});
    await refused(args, /empty\.arrow/);
  });

  it("ridden with NaN", async () => {
    const { args, folder } = runOf([[LOG, "nan.csv"]]);
    const text = csv(12, (column, k) => (column === "speed" ? "NaN" : still(column, k)));
    writeFileSync(join(folder, "nan.csv"), text);
    await refused(args, /nan\.csv/, /speed|no usable run/);
  });

  it("with words for numbers: the line", async () => {
    const { args, folder } = runOf([[LOG, "words.csv"]]);
    writeFileSync(
      join(folder, "words.csv"),
      csv(12, (column, k) => (column === "speed" && k === 5 ? "fast" : still(column, k))),
    );
    await refused(args, /words\.csv:7/, /fast/);
  });

  it("with too few runs for the confidence: how many it takes", async () => {
    const { args, folder } = runOf([
      [LOG, "few.csv"],
      ["steps: 200", "steps: 1"],
    ]);
    writeFileSync(join(folder, "few.csv"), csv(12, still));
    // split conformal at 0.9 takes K >= 1 / 0.1 - 1 = 9 calibration runs, at a share of 0.3 about 30 in all
    await refused(args, /few\.csv/, /\b9 are needed/, /about 30 runs/);
  });
});

describe("options and commands", () => {
  const plant = "/nowhere/plant.yaml";
  it("a seed that is none", () =>
    refused(["run", plant, "--out", "x", "--seed", "abc"], /--seed: given 'abc'; allowed is a whole number/));
  it("a negative seed", () => refused(["run", plant, "--out", "x", "--seed", "-1"], /--seed/));
  it("an unknown command", () => refused(["rum"], /unknown command 'rum'/, /run/));
  it("an unknown option", () => refused(["run", plant, "--out", "x", "--fast"], /unknown option '--fast'/));
  it("no --out", () => refused(["run", plant], /--out/));
  it("no plant", () => refused(["run", "--out", "x"], /plant/));
});

describe("a run folder", () => {
  it("that holds other files, which stay", async () => {
    const folder = scratch();
    const path = plantFile(folder, quickRover());
    await refused(["run", path, "--out", folder], /holds files but no manifest\.json/, /new or empty folder/);
    expect(readdirSync(folder)).toEqual(["plant.yaml"]);
  });

  it("that is a file", async () => {
    const folder = scratch();
    const path = plantFile(folder, quickRover());
    await refused(["run", path, "--out", path], /plant\.yaml/, /folder/);
  });

  it("that is not there, or empty, for a stage", async () => {
    const folder = scratch();
    await refused(["metric", join(folder, "none")], /no such run folder/);
    mkdirSync(join(folder, "empty"));
    await refused(["metric", join(folder, "empty")], /empty folder/, /fairlead run/);
    await refused(["recheck", join(folder, "empty")], /empty folder/);
  });

  it("whose files a stage needs are not made yet", async () => {
    const folder = scratch();
    plantFile(folder, quickRover());
    const manifest = {
      format: 1,
      seed: 1,
      parent: null,
      inputs: {},
      stages: {},
      plantPath: join(folder, "plant.yaml"),
    };
    writeFileSync(join(folder, "manifest.json"), JSON.stringify(manifest));
    await refused(["metric", folder], /residual\.json: missing/, /'metric' needs it/);
    await refused(["recheck", folder], /certificates\.json: missing/);
  });

  it("whose manifest is damaged", async () => {
    const folder = scratch();
    const path = plantFile(folder, quickRover());
    for (const text of ['{"format": 1, "sta', "[]", "null", '{"format": 2}', '"text"']) {
      writeFileSync(join(folder, "manifest.json"), text);
      await refused(["run", path, "--out", folder, "--quiet"], /manifest\.json/);
      await refused(["metric", folder], /manifest\.json/);
    }
  });
});

describe("doctor and version", () => {
  it("says which engine runs and checks closed forms", async () => {
    const { status, out, err } = await fairlead("doctor", "--json");
    expect({ status, err }).toEqual({ status: 0, err: "" });
    const report = JSON.parse(out) as {
      fairlead: string;
      engine: { name: string; version: string };
      checks: { name: string; found: number; expected: number; passed: boolean }[];
    };
    expect(report.fairlead).toBe(FAIRLEAD_VERSION);
    expect(["native", "wasm", "cpu"]).toContain(report.engine.name);
    expect(report.engine.version).toMatch(/^\d+\.\d+/);
    expect(report.checks.length).toBeGreaterThanOrEqual(3);
    for (const { name, found, expected, passed } of report.checks) {
      expect(passed, name).toBe(true);
      expect(found, name).toBeCloseTo(expected, 8);
    }
  });

  it("has the version of the package", async () => {
    const { version } = JSON.parse(readFileSync(join(ROOT, "package.json"), "utf8")) as { version: string };
    expect(FAIRLEAD_VERSION).toBe(version);
    expect((await fairlead("--version")).out.trim()).toBe(version);
  });
});
