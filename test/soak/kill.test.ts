// The binary killed at random moments: nothing half-written, and the same command ends with the same bytes.
import { existsSync, mkdirSync, readdirSync, rmSync, writeFileSync } from "node:fs";
import { join } from "node:path";
import { afterAll, describe, expect, it } from "vitest";
import { seededRandom } from "../../src/num/random.js";
import { frozenBinary, plantFile, quickRover, ROOT, startAt, temporaryFolder } from "../cli/binary.js";
import { assertWhole, bytesOf } from "../cli/runFiles.js";

const SEED = 20261201;
const KILLS = 50;

describe(`${KILLS} kills at random moments, seed ${SEED}`, () => {
  const top = temporaryFolder();
  afterAll(() => rmSync(top, { recursive: true, force: true }));

  it("leave nothing half-written, and every job ends as one that was let alone", async () => {
    const binary = frozenBinary(top);
    const from = performance.now();
    const plant = plantFile(top, quickRover());
    const [whole, killed] = [join(top, "whole"), join(top, "killed")];
    expect((await startAt(binary, ["run", plant, "--out", whole, "--quiet"]).ended).status).toBe(0);
    // of a job in one go; the shortest so far, for other load on the machine makes a job longer
    let wholeSeconds = (performance.now() - from) / 1000;
    const random = seededRandom(SEED).stream("kill");
    const kills: { moment: number; kept: number; parts: number }[] = [];
    let [jobs, kept] = [0, 0];
    while (kills.length < KILLS) {
      const moment = Math.round(1000 * wholeSeconds * random.uniform());
      const started = performance.now();
      const run = startAt(binary, ["run", plant, "--out", killed]);
      const timer = setTimeout(() => run.child.kill("SIGKILL"), moment);
      const { signal, status, err } = await run.ended;
      clearTimeout(timer);
      const keptNow = err.match(/kept from before/g)?.length ?? 0;
      kept += keptNow;
      const parts = existsSync(killed) ? readdirSync(killed).filter((name) => name.endsWith(".part")).length : 0;
      if (signal === "SIGKILL") {
        if (existsSync(killed)) assertWhole(killed);
        kills.push({ moment: moment / 1000, kept: keptNow, parts });
        continue;
      }
      expect(status, err).toBe(0);
      if (keptNow === 0) wholeSeconds = Math.min(wholeSeconds, (performance.now() - started) / 1000);
      expect(parts).toBe(0);
      expect(bytesOf(killed)).toEqual(bytesOf(whole));
      rmSync(killed, { recursive: true });
      jobs++;
    }
    const last = await startAt(binary, ["run", plant, "--out", killed]).ended;
    expect(last.status, last.err).toBe(0);
    expect(readdirSync(killed).filter((name) => name.endsWith(".part"))).toEqual([]);
    expect(bytesOf(killed)).toEqual(bytesOf(whole));
    const seconds = Math.round((performance.now() - from) / 1000);
    mkdirSync(join(ROOT, "test/bench"), { recursive: true });
    writeFileSync(
      join(ROOT, "test/bench/kill.json"),
      `${JSON.stringify({ seed: SEED, kills: kills.length, jobsEnded: jobs + 1, stagesKept: kept, withPartsLeft: kills.filter(({ parts }) => parts > 0).length, wholeSeconds: Number(wholeSeconds.toFixed(1)), seconds, moments: kills }, null, 1)}\n`,
    );
  });
});
