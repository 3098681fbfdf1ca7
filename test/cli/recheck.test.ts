// `recheck` on a finished run, and on copies of it that were tampered with: every one must be caught, by name.
import { cpSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { join } from "node:path";
import { afterAll, beforeAll, describe, expect, it } from "vitest";
import { readSavedTable, type SavedColumn, writeTable } from "../../src/logs/savedTable.js";
import type { ResidualFile } from "../../src/model/controlAffine.js";
import type { DualMetricFile } from "../../src/nets/dualMetric.js";
import { FILES } from "../../src/pipeline/artifacts.js";
import { boxesColumns } from "../../src/pipeline/boxesTable.js";
import type { CertifiedTube } from "../../src/pipeline/certifyMetric.js";
import { readPlant } from "../../src/plant/readPlant.js";
import { fairlead, plantFile, quickRover, ROOT, scratch, start, temporaryFolder, until } from "./binary.js";
import { readJson } from "./runFiles.js";

const top = temporaryFolder();
const run = join(top, "run");
const other = join(top, "other");

beforeAll(async () => {
  const plant = plantFile(top, quickRover());
  const whole = fairlead("run", plant, "--out", run, "--quiet");
  const started = start("run", plant, "--out", other, "--seed", "2");
  await until(started, /^ {2}residual/m);
  started.child.kill("SIGKILL");
  const { status, err } = await whole;
  expect(status, err).toBe(0);
}, 120_000);
afterAll(() => rmSync(top, { recursive: true, force: true }));

interface Result {
  readonly holds: boolean;
  readonly boxes: number;
  readonly faults: readonly string[];
}

async function recheckOf(tamper: (folder: string) => void): Promise<Result & { status: number | null; err: string }> {
  const folder = join(scratch(), "copy");
  cpSync(run, folder, { recursive: true });
  tamper(folder);
  const { status, out, err } = await fairlead("recheck", folder, "--json", "--quiet");
  expect(err).not.toMatch(/^\s+at .*[:(]/m);
  return { ...(JSON.parse(out) as Result), status, err };
}

/** Values of a table's columns by name; its units do not matter to a recheck. */
function boxes(folder: string, change: (columns: Map<string, number[]>) => void): void {
  const path = join(folder, FILES.boxes);
  const columns = new Map([...readSavedTable(path)].map(([name, values]) => [name, Array.from(values, Number)]));
  change(columns);
  const saved = [...columns].map(
    ([name, values]): SavedColumn => ({ name, unit: "", values: Float64Array.from(values) }),
  );
  writeTable(path, saved, {});
}

/** Text of a JSON file with its value changed in place. */
function json<T>(folder: string, name: string, change: (value: T) => void): void {
  const value = readJson<T>(folder, name);
  change(value);
  writeFileSync(join(folder, name), JSON.stringify(value));
}

interface Tube {
  rate: number;
  claimedRate: number;
  radius: number;
  authority: number;
  authorityDensity: number;
  pushes: number[];
  sigma: number;
  spreads: { direction: { kind: string }; value: number }[];
}
interface Learned {
  name: string;
  margins: Record<string, number>;
  authority: Record<string, number>;
  rate: number;
  evidence: { tube: Tube };
}
const learnedOf = (list: Learned[]): Learned => list.find(({ name }) => name === "learned")!;
const tube = (folder: string, change: (tube: Tube) => void): void =>
  json<Learned[]>(folder, FILES.certificates, (list) => change(learnedOf(list).evidence.tube));
const summary = (folder: string, change: (learned: Learned) => void): void =>
  json<{ certificates: Learned[] }>(folder, FILES.summary, ({ certificates }) => change(learnedOf(certificates)));

describe("a proof", () => {
  it("has the same boxes for any number of workers: those of the run", async () => {
    const built = <T>(path: string): Promise<T> => import(join(ROOT, "dist/src", path)) as Promise<T>;
    const { proveClaims, tubeClaims } =
      await built<typeof import("../../src/pipeline/proveTube.js")>("pipeline/proveTube.js");
    const plan = readPlant(readFileSync(join(run, FILES.plant), "utf8"), join(top, "plant.yaml"));
    if (!plan.ok) throw new Error("the copy of the plant file does not read");
    const made = readJson<{ metric: DualMetricFile }>(run, FILES.learned);
    const residual = readJson<ResidualFile>(run, FILES.residual);
    const { bounds } = readJson<{ bounds: { fitted: number[] } }>(run, FILES.disturbance);
    const { evidence } = learnedOf(readJson<Learned[]>(run, FILES.certificates));
    const claims = tubeClaims(evidence.tube as unknown as CertifiedTube, bounds.fitted);
    const { signal } = new AbortController();
    for (const workers of [1, 2, 3]) {
      const proof = await proveClaims({ plant: plan.plant, residual, metric: made.metric }, claims, {
        workers,
        progress: () => undefined,
        signal,
      });
      expect(proof.status).toBe("proved");
      const path = join(top, `boxes-${workers}.arrow`);
      writeTable(path, boxesColumns(plan.plant, proof.leaves), {});
      expect(readFileSync(path).equals(readFileSync(join(run, FILES.boxes))), `${workers} workers`).toBe(true);
    }
  });
});

describe("recheck", () => {
  it("passes on the run as made, and on a copy elsewhere", async () => {
    const { status, holds, boxes: count, faults, err } = await recheckOf(() => undefined);
    expect({ status, holds, faults }).toEqual({ status: 0, holds: true, faults: [] });
    expect(count).toBeGreaterThan(1);
    expect(err).toContain(`${count} boxes tile the envelope`);
  });

  const tampered: readonly [string, RegExp, (folder: string) => void][] = [
    [
      "a box's rate raised",
      /box 3 .*does not pass again/,
      (folder) =>
        boxes(folder, (columns) => {
          columns.get("rate")![3]! += 1;
        }),
    ],
    [
      "a box removed",
      /cover|share|tile|gap/,
      (folder) =>
        boxes(folder, (columns) => {
          for (const values of columns.values()) values.splice(2, 1);
        }),
    ],
    [
      "a box twice",
      /cover|overlap|share|tile|twice/,
      (folder) =>
        boxes(folder, (columns) => {
          for (const values of columns.values()) values.push(values[1]!);
        }),
    ],
    [
      "a box twice in the place of another",
      /cover|overlap|share|tile|gap|twice/,
      (folder) =>
        boxes(folder, (columns) => {
          for (const values of columns.values()) values[2] = values[1]!;
        }),
    ],
    [
      "a box that is open",
      /box 4 .*is open, not proved/,
      (folder) =>
        boxes(folder, (columns) => {
          columns.get("status")![4] = 0;
        }),
    ],
    [
      "a table that is cut",
      /boxes\.arrow.*not a whole table|different lengths/,
      (folder) => {
        const path = join(folder, FILES.boxes);
        const bytes = readFileSync(path);
        writeFileSync(path, bytes.subarray(0, Math.floor(0.6 * bytes.length)));
      },
    ],
    [
      "the metric's weights changed by 1e-3",
      /box \d+ .*does not pass again/,
      (folder) => {
        const name = FILES.learned;
        const text = readFileSync(join(folder, name), "utf8");
        const bump = (value: unknown): unknown =>
          typeof value === "number" && !Number.isInteger(value)
            ? value * (1 + 1e-3)
            : Array.isArray(value)
              ? value.map(bump)
              : value;
        const walk = (key: string, value: unknown): unknown => (/weights|bias/.test(key) ? bump(value) : value);
        writeFileSync(join(folder, name), JSON.stringify(JSON.parse(text, walk)));
      },
    ],
    [
      "the residual of another seed",
      /residual\.json is not the file that the run made/,
      (folder) => cpSync(join(other, FILES.residual), join(folder, FILES.residual)),
    ],
    [
      "the disturbance bound halved",
      /the summary's disturbance bound of slipAlong/,
      (folder) =>
        json<{ bounds: { fitted: number[] } }>(folder, FILES.disturbance, (bound) => {
          bound.bounds.fitted = bound.bounds.fitted.map((value) => value / 2);
        }),
    ],
    [
      "the summary's disturbance bound halved",
      /the summary's disturbance bound of slipAlong/,
      (folder) =>
        json<{ disturbance: { channels: { bound: number }[] } }>(folder, FILES.summary, ({ disturbance }) => {
          disturbance.channels[0]!.bound /= 2;
        }),
    ],
    [
      "the disturbance bound doubled",
      /box \d+ .*does not pass again/,
      (folder) =>
        json<{ bounds: { fitted: number[] } }>(folder, FILES.disturbance, (bound) => {
          bound.bounds.fitted = bound.bounds.fitted.map((value) => 2 * value);
        }),
    ],
    [
      "the tube's radius shrunk",
      /the tube's radius/,
      (folder) =>
        tube(folder, (made) => {
          made.radius *= 0.9;
        }),
    ],
    [
      "radius and authority and margins shrunk together",
      /the tube's radius/,
      (folder) => {
        tube(folder, (made) => {
          made.radius *= 0.9;
          made.authority *= 0.9;
        });
        summary(folder, ({ margins, authority }) => {
          for (const part of [margins, authority]) for (const name of Object.keys(part)) part[name]! *= 0.9;
        });
      },
    ],
    [
      "the summary's margin shrunk",
      /the summary's margin of planar/,
      (folder) =>
        summary(folder, ({ margins }) => {
          margins.planar! *= 0.99;
        }),
    ],
    [
      "the asked spread dropped and its margin shrunk",
      /the summary's margin of planar follows from no claim/,
      (folder) => {
        tube(folder, (made) => {
          made.spreads = made.spreads.filter(({ direction }) => direction.kind !== "planar");
        });
        summary(folder, ({ margins }) => {
          margins.planar! *= 0.5;
        });
      },
    ],
    [
      "a spread loosened",
      /the summary's margin of/,
      (folder) =>
        tube(folder, ({ spreads }) => {
          for (const spread of spreads) spread.value *= 2;
        }),
    ],
    [
      "a push loosened",
      /the tube's sigma/,
      (folder) =>
        tube(folder, ({ pushes }) => {
          pushes[0]! *= 2;
        }),
    ],
    [
      "spreads tightened with the margins",
      /box \d+ .*does not pass again/,
      (folder) => {
        tube(folder, ({ spreads }) => {
          for (const spread of spreads) spread.value *= 0.81;
        });
        summary(folder, ({ margins }) => {
          for (const name of Object.keys(margins)) margins[name]! *= 0.9;
        });
      },
    ],
    [
      "a faster claimed rate",
      /box \d+ .*does not pass again/,
      (folder) =>
        tube(folder, (made) => {
          made.claimedRate *= 1.5;
        }),
    ],
    [
      "a claimed rate at the tube's own",
      /not below the claimed rate/,
      (folder) =>
        tube(folder, (made) => {
          made.claimedRate = made.rate;
        }),
    ],
    [
      "a tighter authority",
      /box \d+ .*does not pass again/,
      (folder) =>
        tube(folder, (made) => {
          made.authorityDensity *= 0.5;
        }),
    ],
  ];
  for (const [name, fault, tamper] of tampered) {
    it(`catches ${name}`, async () => {
      const { status, holds, faults } = await recheckOf(tamper);
      expect(holds).toBe(false);
      expect(status).toBe(3);
      expect(faults.join("\n")).toMatch(fault);
    });
  }
});
