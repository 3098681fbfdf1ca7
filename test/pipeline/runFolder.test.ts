// The run folder and the rule by which a stage is kept: written whole, never another's files, run again on any change.
import { mkdirSync, readdirSync, readFileSync, writeFileSync } from "node:fs";
import { join } from "node:path";
import { describe, expect, it } from "vitest";
import type { Engine } from "../../src/engine/openEngine.js";
import { openRunFolder, type RunFolder, RunFolderError, runDigest, sha256 } from "../../src/pipeline/runFolder.js";
import { runStage, type Stage, type StageContext } from "../../src/pipeline/stage.js";
import { scratch } from "../cli/binary.js";
import { ROVER } from "../plant/examples.js";
import { plantOf } from "../plant/reading.js";

describe("openRunFolder", () => {
  it("makes a folder with those above it, only when asked", () => {
    const path = join(scratch(), "a/b/run");
    expect(() => openRunFolder(path, false)).toThrow(RunFolderError);
    openRunFolder(path, true);
    expect(readdirSync(path)).toEqual([]);
    expect(openRunFolder(path, false).manifest()).toBeNull();
  });

  it("refuses a folder with files of others, and a file, and touches neither", () => {
    const path = scratch();
    writeFileSync(join(path, "thesis.txt"), "words");
    writeFileSync(join(path, "old.part"), "half");
    expect(() => openRunFolder(path, true)).toThrow(/holds files but no manifest\.json.*new or empty folder/);
    expect(() => openRunFolder(join(path, "thesis.txt"), true)).toThrow(RunFolderError);
    expect(() => openRunFolder(join(path, "thesis.txt", "in"), true)).toThrow(RunFolderError);
    expect(readdirSync(path).sort()).toEqual(["old.part", "thesis.txt"]);
  });

  it("removes what a killed write left, and nothing else", () => {
    const path = scratch();
    for (const name of ["manifest.json", "summary.json", "summary.json.part"]) writeFileSync(join(path, name), "{}");
    openRunFolder(path, false);
    expect(readdirSync(path).sort()).toEqual(["manifest.json", "summary.json"]);
    const killedAtOnce = join(path, "other");
    mkdirSync(killedAtOnce);
    writeFileSync(join(killedAtOnce, "manifest.json.part"), "{");
    expect(openRunFolder(killedAtOnce, true).manifest()).toBeNull();
  });

  it("writes whole: a write that fails leaves the former file", () => {
    const path = scratch();
    const folder = openRunFolder(path, true);
    folder.writeJson("a.json", { value: 1 });
    expect(folder.readJson("a.json")).toEqual({ value: 1 });
    mkdirSync(join(path, "a.json.part"));
    expect(() => folder.writeJson("a.json", { value: 2 })).toThrow();
    expect(folder.readJson("a.json")).toEqual({ value: 1 });
    expect(folder.hash("a.json")).toBe(sha256(readFileSync(join(path, "a.json"))));
  });

  it("says which file is missing or not whole", () => {
    const path = scratch();
    const folder = openRunFolder(path, true);
    expect(() => folder.readText("no.json")).toThrow(/no\.json: missing or unreadable/);
    folder.writeText("cut.json", '{"a": [1,');
    expect(() => folder.readJson("cut.json")).toThrow(/cut\.json: not whole JSON/);
    for (const text of ["null", "[]", '{"format":2}', '{"format":1,"seed":1,"plantPath":"p"}']) {
      folder.writeText("manifest.json", text);
      expect(() => folder.manifest(), text).toThrow(/manifest\.json: not a manifest of format 1/);
    }
  });

  it("hashes SHA-256", () => {
    // NIST, Secure Hash Standard examples: "abc"
    expect(sha256("abc")).toBe("ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
  });
});

const PLANT = plantOf(ROVER);
const ENGINE = { name: "wasm", version: "1" } as Engine;

function context(folder: RunFolder, changes: Partial<StageContext> = {}): StageContext {
  return {
    folder,
    plant: PLANT,
    plantText: ROVER,
    plantPath: "/fields/plant.yaml",
    runtime: "node",
    seed: 1,
    engine: () => Promise.resolve(ENGINE),
    progress: () => undefined,
    signal: new AbortController().signal,
    parent: null,
    code: "code",
    workers: 1,
    ...changes,
  };
}

function stages(): { ran: string[]; first: Stage; second: Stage; sources: Record<string, string> } {
  const ran: string[] = [];
  const sources: Record<string, string> = { log: "hash of the log" };
  const first: Stage = {
    name: "intake",
    title: "",
    reads: [],
    makes: ["a.json", "sometimes.json"],
    learns: false,
    sources: () => sources,
    run: ({ folder, seed }) => {
      ran.push("first");
      folder.writeJson("a.json", { seed });
      return Promise.resolve("made a");
    },
  };
  const second: Stage = {
    name: "residual",
    title: "",
    reads: ["a.json"],
    makes: ["b.json"],
    learns: true,
    run: ({ folder }) => {
      ran.push("second");
      folder.writeJson("b.json", { of: folder.readText("a.json") });
      return Promise.resolve("");
    },
  };
  return { ran, first, second, sources };
}

describe("runStage", () => {
  const settled = async () => {
    const folder = openRunFolder(join(scratch(), "run"), true);
    const { ran, first, second, sources } = stages();
    const both = async (changes: Partial<StageContext> = {}): Promise<string[]> => {
      ran.length = 0;
      for (const stage of [first, second]) await runStage(stage, context(folder, changes), false);
      return [...ran];
    };
    expect(await both()).toEqual(["first", "second"]);
    expect(await both()).toEqual([]);
    return { folder, both, first, second, sources, ran };
  };

  it("keeps what the same inputs made, and says so", async () => {
    const { folder, first } = await settled();
    const kept = await runStage(first, context(folder), false);
    expect(kept).toMatchObject({ name: "intake", reused: true });
    expect(folder.manifest()!.stages.intake!.seconds).toBe(kept.seconds);
    expect(await runStage(first, context(folder), true)).toMatchObject({ reused: false, note: "made a" });
  });

  const changes: [string, Partial<StageContext>, string[]][] = [
    ["another plant text", { plantText: `${ROVER}# a word\n` }, ["first", "second"]],
    ["another seed", { seed: 2 }, ["first", "second"]],
    ["other code", { code: "other" }, ["first", "second"]],
    [
      "another engine, which only learning stages see",
      { engine: () => Promise.resolve({ ...ENGINE, name: "cpu" }) },
      ["second"],
    ],
    ["another count of workers, which changes nothing", { workers: 7 }, []],
    ["another folder of the plant file, which changes nothing", { plantPath: "/elsewhere/plant.yaml" }, []],
  ];
  for (const [what, change, expected] of changes)
    it(`runs again on ${what}`, async () => {
      const { both } = await settled();
      expect(await both(change)).toEqual(expected);
      expect(await both(change)).toEqual([]);
    });

  it("runs again on another source file", async () => {
    const { both, sources } = await settled();
    sources.log = "another hash";
    // the second reads only what the first made, and that has come out the same
    expect(await both()).toEqual(["first"]);
    expect(await both()).toEqual([]);
  });

  it("runs again what was edited by hand, deleted, or added to what it makes", async () => {
    const { both, folder } = await settled();
    const made = folder.readText("b.json");
    folder.writeText("b.json", "{}");
    expect(await both()).toEqual(["second"]);
    expect(folder.readText("b.json")).toBe(made);
    folder.remove("a.json");
    expect(await both()).toEqual(["first"]);
    folder.writeText("sometimes.json", "{}");
    expect(await both()).toEqual(["first"]);
    expect(folder.has("sometimes.json")).toBe(false);
  });

  it("needs the files of the stages before it", async () => {
    const folder = openRunFolder(join(scratch(), "run"), true);
    await expect(runStage(stages().second, context(folder), false)).rejects.toThrow(
      /a\.json: missing.*'residual' needs it/,
    );
  });

  it("that fails leaves a run folder without its record, which goes on", async () => {
    const folder = openRunFolder(join(scratch(), "run"), true);
    const { first } = stages();
    const broken: Stage = {
      ...first,
      run: async (of) => {
        await first.run(of);
        throw new Error("power cut");
      },
    };
    await expect(runStage(broken, context(folder), false)).rejects.toThrow("power cut");
    const again = openRunFolder(folder.path, true);
    expect(again.manifest()!.stages).toEqual({});
    expect(await runStage(first, context(again), false)).toMatchObject({ reused: false });
  });

  it("digests what was made but for the report", async () => {
    const { folder, first, second } = await settled();
    const digest = runDigest(folder.manifest()!);
    await runStage({ ...second, name: "report", makes: ["c.json"] }, context(folder), false);
    expect(runDigest(folder.manifest()!)).toBe(digest);
    await runStage(first, context(folder, { seed: 9 }), false);
    expect(runDigest(folder.manifest()!)).not.toBe(digest);
  });
});
