// The whole job by the real binary: what it leaves, what it prints, that a seed fixes it, and that it can be stopped.
import { existsSync, readdirSync, readFileSync, rmSync } from "node:fs";
import { join } from "node:path";
import { Ajv } from "ajv";
import { afterAll, beforeAll, describe, expect, it } from "vitest";
import { FILES } from "../../src/pipeline/artifacts.js";
import type { Summary } from "../../src/report/artifacts.js";
import { type Ended, fairlead, plantFile, quickRover, ROOT, start, temporaryFolder, until } from "./binary.js";
import { assertWhole, bytesOf, RUN_FILES, readJson } from "./runFiles.js";

const top = temporaryFolder();
const plant = plantFile(top, quickRover());
const plain = join(top, "plain");
const json = join(top, "json");
let [first, second]: Ended[] = [];

beforeAll(async () => {
  [first, second] = await Promise.all([
    fairlead("run", plant, "--out", plain),
    fairlead("run", plant, "--out", json, "--json", "--quiet"),
  ]);
}, 120_000);
afterAll(() => rmSync(top, { recursive: true, force: true }));

const summaryOf = (folder: string): Summary => readJson<Summary>(folder, FILES.summary);

describe("run", () => {
  it("ends with the status of its verdict and leaves every file", () => {
    const { verdict } = summaryOf(plain);
    expect(verdict.holds, verdict.text).toBe(true);
    expect(first!.status, first!.err).toBe(0);
    expect(readdirSync(plain).sort()).toEqual([...RUN_FILES, "manifest.json"].sort());
    assertWhole(plain);
  });

  it("writes a summary that its schema allows, and the schema refuses a foreign one", () => {
    const allowed = new Ajv({ strict: false }).compile(
      JSON.parse(readFileSync(join(ROOT, "configs/summary.schema.json"), "utf8")) as object,
    );
    expect(allowed(summaryOf(plain)), JSON.stringify(allowed.errors)).toBe(true);
    expect(allowed({ ...summaryOf(plain), unsupportedShare: 2 })).toBe(false);
  });

  it("writes a page that needs nothing else", () => {
    const page = readFileSync(join(plain, FILES.report), "utf8");
    const foreign = page.replace(/xmlns(:\w+)?="[^"]*"/g, "").match(/(https?:)?\/\/[\w.-]+\.\w+[^"'\s<]*/g);
    expect(foreign).toBeNull();
    expect(page).not.toMatch(/<(script|link|img|iframe)[^>]*\b(src|href)="(?!data:|#)/);
    expect(page).toContain(summaryOf(plain).plant);
  });

  it("prints people's text to standard error, the machine form to standard output", () => {
    expect(first!.out).toBe("");
    for (const stage of ["intake", "residual", "bound", "analytic", "metric", "certify", "report"])
      expect(first!.err).toMatch(new RegExp(`^ {2}${stage} +\\d+\\.\\d s`, "m"));
    expect(first!.err).toContain(`report: ${join(plain, FILES.report)}`);
    expect(second!.status).toBe(0);
    expect(second!.out).toBe(readFileSync(join(json, FILES.summary), "utf8"));
    for (const { err } of [first!, second!]) expect(err).not.toMatch(/^\s+at .*[:(]/m);
  });

  it("writes down what it was made from", () => {
    const manifest = readJson<{ inputs: Record<string, string>; seed: number; stages: object }>(plain, "manifest.json");
    expect(Object.keys(manifest.inputs).sort()).toEqual([join(ROOT, "data/orchard-rover.arrow"), "plant"]);
    for (const hash of Object.values(manifest.inputs)) expect(hash).toMatch(/^[0-9a-f]{64}$/);
    expect(manifest.seed).toBe(1);
    expect(Object.keys(manifest.stages)).toHaveLength(7);
  });
});

describe("a seed", () => {
  it("fixes every byte but the wall clock", () => expect(bytesOf(json)).toEqual(bytesOf(plain)));
});

describe("stopping", () => {
  it("killed at some moments goes on and ends with the same bytes; another seed makes others", async () => {
    const other = join(top, "other");
    const otherSeed = start("run", plant, "--out", other, "--seed", "2");
    const killed = join(top, "killed");
    // within the first stage, then at some moment of the one after each of these
    for (const [after, wait] of [
      [null, 900],
      ["intake", 300],
      ["bound", 200],
      ["analytic", 700],
    ] as const) {
      const run = start("run", plant, "--out", killed);
      if (after !== null) await until(run, new RegExp(`^ {2}${after}`, "m"));
      setTimeout(() => run.child.kill("SIGKILL"), wait);
      expect((await run.ended).signal).toBe("SIGKILL");
      if (existsSync(killed)) assertWhole(killed);
    }
    const { status, err } = await fairlead("run", plant, "--out", killed);
    expect(status, err).toBe(0);
    expect(err).toContain("kept from before");
    expect(readdirSync(killed).filter((name) => name.endsWith(".part"))).toEqual([]);
    expect(bytesOf(killed)).toEqual(bytesOf(plain));

    await until(otherSeed, /^ {2}metric/m);
    otherSeed.child.kill("SIGKILL");
    await otherSeed.ended;
    for (const name of [FILES.samples, FILES.residual, FILES.learned])
      expect(readFileSync(join(other, name)).equals(readFileSync(join(plain, name))), name).toBe(false);
  });

  it("interrupted by Ctrl-C says so, ends with 1, and goes on afterwards", async () => {
    const folder = join(top, "interrupted");
    const run = start("run", plant, "--out", folder);
    await until(run, /^ {2}intake/m);
    run.child.kill("SIGINT");
    const { status, err } = await run.ended;
    expect(status, err).toBe(1);
    expect(err).toContain("stopping after the present step");
    expect(err).toContain("the same command goes on from there");
    expect(err).not.toMatch(/^\s+at .*[:(]/m);
    assertWhole(folder);
    const again = start("run", plant, "--out", folder);
    await until(again, /kept from before/);
    again.child.kill("SIGKILL");
    expect((await again.ended).err).toMatch(/^ {2}intake +kept from before/m);
  });

  it("a second call with nothing changed keeps every stage and says the same", async () => {
    const { status, err } = await fairlead("run", plant, "--out", plain);
    expect(status).toBe(0);
    expect(err.match(/kept from before/g)).toHaveLength(7);
    expect(bytesOf(plain)).toEqual(bytesOf(json));
  });
});
