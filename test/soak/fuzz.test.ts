// Mutated files: each is read or refused with a message of the reader's own, quickly; what is accepted is checked by other
// code. The seeds of a failure are in its message; figures go to test/bench/fuzz.json.
import { mkdtempSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join, resolve } from "node:path";
import { Ajv } from "ajv";
import { tableFromIPC, tableToIPC } from "apache-arrow";
import { afterAll, expect, it } from "vitest";
import { parse } from "yaml";
import { intakeLogs } from "../../src/logs/intake.js";
import { LogError } from "../../src/logs/logError.js";
import { readPlan } from "../../src/logs/readPlan.js";
import { type Random, seededRandom } from "../../src/num/random.js";
import { plantJsonSchema } from "../../src/plant/jsonSchema.js";
import type { Plant } from "../../src/plant/plant.js";
import { readPlant } from "../../src/plant/readPlant.js";

const SEED = 20261201;
const FILES = { plant: 1200, csv: 700, arrow: 500, plan: 300 };
const SLOW_SECONDS = 5;
const root = resolve(import.meta.dirname, "../..");
const folder = mkdtempSync(join(tmpdir(), "fuzz-"));
const figures: Record<string, { files: number; accepted: number; refused: number; slowestSeconds: number }> = {};
afterAll(() => {
  rmSync(folder, { recursive: true });
  writeFileSync(join(root, "test/bench/fuzz.json"), `${JSON.stringify({ seed: SEED, figures }, null, 2)}\n`);
});

const SPLICES = [
  "NaN",
  "inf",
  "-",
  "1e999",
  '"',
  ",",
  "\n",
  ":",
  "{",
  "[",
  "&a",
  "*a",
  "!x",
  "\u0000",
  "é",
  "0x10",
  " ",
  "|",
  "#",
  "%",
  "..",
  "9".repeat(400),
];

function mutateBytes(bytes: Buffer, random: Random): Buffer {
  let out = Buffer.from(bytes);
  const times = 1 + random.integer(4);
  for (let i = 0; i < times; i++) {
    const at = random.integer(Math.max(1, out.length));
    const size = 1 + random.integer(40);
    const kind = random.integer(6);
    if (kind === 0) out[at] = random.integer(256);
    else if (kind === 1) out = out.subarray(0, at);
    else if (kind === 2) out = Buffer.concat([out.subarray(0, at), out.subarray(Math.min(out.length, at + size))]);
    else if (kind === 3)
      out = Buffer.concat([
        out.subarray(0, at),
        Buffer.from(SPLICES[random.integer(SPLICES.length)]!),
        out.subarray(at),
      ]);
    else if (kind === 4) out = Buffer.concat([out.subarray(0, at), out.subarray(at, at + size), out.subarray(at)]);
    else {
      const to = random.integer(Math.max(1, out.length));
      out = Buffer.concat([
        out.subarray(0, at),
        out.subarray(to, to + size),
        out.subarray(Math.min(out.length, at + size)),
      ]);
    }
    if (out.length === 0) return out;
  }
  return out;
}

/** Runs each mutated file; `use` returns whether it was accepted. */
async function fuzz(
  kind: keyof typeof FILES,
  original: Buffer,
  use: (bytes: Buffer, label: string) => Promise<boolean>,
): Promise<void> {
  const tally = { files: FILES[kind], accepted: 0, refused: 0, slowestSeconds: 0 };
  for (let i = 0; i < FILES[kind]; i++) {
    const label = `${kind}, seed ${SEED}, file ${i}`;
    const bytes = mutateBytes(original, seededRandom(SEED).stream(label));
    const from = performance.now();
    if (await use(bytes, label)) tally.accepted++;
    else tally.refused++;
    const seconds = (performance.now() - from) / 1000;
    tally.slowestSeconds = Math.max(tally.slowestSeconds, seconds);
    expect(seconds, label).toBeLessThan(SLOW_SECONDS);
  }
  figures[kind] = tally;
  expect(tally.refused).toBeGreaterThan(0);
}

function plantAt(name: string): Plant {
  const path = join(root, "configs", `${name}.yaml`);
  const result = readPlant(readFileSync(path, "utf8"), path);
  if (!result.ok) throw new Error("the bundled plant does not read");
  return result.plant;
}

/** True when it was read; false when it was refused with the reader's own error; anything else is a defect. */
async function isRead(read: () => Promise<unknown>, label: string): Promise<boolean> {
  try {
    await read();
    return true;
  } catch (error) {
    if (!(error instanceof LogError)) throw new Error(`${label}: not a message of the reader: ${String(error)}`);
    expect(error.message.length, label).toBeGreaterThan(20);
    return false;
  }
}

it("plant files", async () => {
  const validate = new Ajv({ allErrors: true, allowUnionTypes: true, strictTuples: false }).compile(plantJsonSchema());
  await fuzz("plant", readFileSync(join(root, "configs/survey-boat.yaml")), async (bytes, label) => {
    const text = bytes.toString("utf8");
    const result = readPlant(text, "/fuzz/plant.yaml");
    if (!result.ok) {
      expect(result.problems.length, label).toBeGreaterThan(0);
      for (const { line, column, message } of result.problems) {
        expect(line, label).toBeGreaterThan(0);
        expect(column, label).toBeGreaterThan(0);
        expect(message.length, label).toBeGreaterThan(8);
      }
      return false;
    }
    // accepted: the published schema, checked by another library, accepts it too
    expect(validate(parse(text)), `${label}: ${JSON.stringify(validate.errors)}`).toBe(true);
    return true;
  });
}, 600_000);

function csvOf(rows: number): Buffer {
  const table = tableFromIPC(readFileSync(join(root, "data/orchard-rover.arrow"))).slice(0, rows);
  const names = table.schema.fields.map(({ name }) => name);
  const columns = names.map((name) => table.getChild(name)!);
  const lines = Array.from({ length: rows }, (_, k) => columns.map((column) => String(column.get(k))).join(","));
  return Buffer.from(`${names.join(",")}\n${lines.join("\n")}\n`);
}

it("CSV logs", async () => {
  const plant = plantAt("orchard-rover");
  const path = join(folder, "log.csv");
  await fuzz("csv", csvOf(80), async (bytes, label) => {
    writeFileSync(path, bytes);
    const accepted = await isRead(() => intakeLogs({ ...plant, logs: { ...plant.logs, files: [path] } }), label);
    // where nothing is quoted, a plain split must agree that every row is whole
    const text = bytes.toString("utf8").replace(/^\ufeff/, "");
    if (accepted && !text.includes('"') && !text.includes("\r")) {
      const lines = text.split("\n").filter((line) => line.trim() !== "");
      const width = lines[0]!.split(",").length;
      for (const line of lines) expect(line.split(",").length, label).toBe(width);
    }
    return accepted;
  });
}, 600_000);

it("Arrow logs", async () => {
  const plant = plantAt("yard-crane");
  const whole = tableFromIPC(readFileSync(join(root, "data/yard-crane.arrow")));
  const path = join(folder, "log.arrow");
  await fuzz("arrow", Buffer.from(tableToIPC(whole.slice(0, 300), "file")), async (bytes, label) => {
    writeFileSync(path, bytes);
    return isRead(() => intakeLogs({ ...plant, logs: { ...plant.logs, files: [path] } }), label);
  });
}, 600_000);

it("plans", async () => {
  const plant = plantAt("orchard-rover");
  const path = join(folder, "plan.csv");
  const lines = readFileSync(join(root, "data/plans/orchard-rover.csv"), "utf8").split("\n").slice(0, 60);
  await fuzz("plan", Buffer.from(`${lines.join("\n")}\n`), async (bytes, label) => {
    writeFileSync(path, bytes);
    return isRead(() => readPlan(plant, path), label);
  });
}, 600_000);
