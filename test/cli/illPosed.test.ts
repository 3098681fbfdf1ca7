// Plants at the edges of what the tool is for, by the real binary on small invented logs written here.
import { existsSync, readFileSync, writeFileSync } from "node:fs";
import { join } from "node:path";
import { describe, expect, it } from "vitest";
import { seededRandom } from "../../src/num/random.js";
import { FILES } from "../../src/pipeline/artifacts.js";
import type { Summary } from "../../src/report/artifacts.js";
import { summarySchema } from "../../src/report/summarySchema.js";
import { type Ended, fairlead, plantFile, scratch } from "./binary.js";
import { readJson } from "./runFiles.js";

interface Invented {
  readonly states: readonly string[];
  readonly inputs: readonly string[];
  /** True rates, the push of the run included. */
  readonly rates: (x: readonly number[], u: readonly number[]) => readonly number[];
  /** Which states a small constant push acts on, and all about the plant but names, logs and networks. */
  readonly plant: string;
  readonly start?: number;
}

const [RUNS, SAMPLES, STEP] = [34, 140, 0.05];

/** Runs under slow waves, each with a push of its own. */
function logOf({ states, inputs, rates, start = 0.3 }: Invented): string {
  const lines = [["time", ...states, ...inputs, "run"].join(",")];
  for (let run = 0; run < RUNS; run++) {
    const random = seededRandom(5).stream(`run ${run}`);
    const waves = inputs.map(() => [1 + random.uniform(), 6 * random.uniform()] as const);
    const push = states.map(() => 0.01 * random.normal());
    let x = states.map(() => start * (2 * random.uniform() - 1));
    for (let k = 0; k < SAMPLES; k++) {
      const inputsAt = (t: number): number[] => waves.map(([w, phase]) => 0.5 * Math.sin(w * t + phase));
      lines.push([k * STEP, ...x, ...inputsAt(k * STEP), `run ${run}`].join(","));
      // the tool reads inputs as straight between samples: so do small steps here
      const [from, to] = [inputsAt(k * STEP), inputsAt((k + 1) * STEP)];
      for (let i = 0; i < 50; i++) {
        const u = from.map((value, j) => value + ((to[j]! - value) * (i + 0.5)) / 50);
        const half = rates(x, u);
        const middle = x.map((value, s) => value + (STEP / 100) * (half[s]! + push[s]!));
        const full = rates(middle, u);
        x = x.map((value, s) => value + (STEP / 50) * (full[s]! + push[s]!));
      }
    }
  }
  return `${lines.join("\n")}\n`;
}

async function outcomeOf(invented: Invented): Promise<{ end: Ended; summary: Summary; page: string }> {
  const folder = scratch();
  writeFileSync(join(folder, "log.csv"), logOf(invented));
  const rest = `
logs: { files: [log.csv], run: run, unsupported: accept }
networks: { residual: { width: 6, steps: 60 }, metric: { width: 6, steps: 80, rounds: 1 } }
seed: 3
`;
  const path = plantFile(folder, `plant: edge\n${invented.plant.trim()}${rest}`);
  const end = await fairlead("run", path, "--out", join(folder, "run"), "--quiet");
  expect(end.err).not.toMatch(/^\s+at .*[:(]/m);
  expect(existsSync(join(folder, "run", FILES.summary)), end.err).toBe(true);
  const summary = readJson<Summary>(join(folder, "run"), FILES.summary);
  const checked = summarySchema.safeParse(summary);
  expect(checked.success, String(checked.error)).toBe(true);
  expect(end.status, end.err).toBe(summary.verdict.holds ? 0 : 3);
  return { end, summary, page: readFileSync(join(folder, "run", FILES.report), "utf8") };
}

const learnedOf = ({ certificates }: Summary) => certificates.find(({ name }) => name === "learned")!;

/** What must never reach a reader, with a few letters around it. */
const oddWords = (page: string): string[] => page.match(/.{0,60}(NaN|Infinity|undefined).{0,40}/g) ?? [];

const CART: Invented = {
  states: ["place", "speed"],
  inputs: ["accel"],
  rates: ([, speed], [accel]) => [speed!, accel! - 0.3 * speed!],
  plant: `
states:
  place: { unit: m, envelope: [-4, 4] }
  speed: { unit: m/s, envelope: [-2, 2] }
inputs:
  accel: { unit: m/s^2, range: [-1, 1] }
rates:
  place: speed
  speed: accel - 0.3 * speed
leftover:
  placePush: { unit: m/s, on: { place: 1 } }
  speedPush: { unit: m/s^2, on: { speed: 1 } }
margin: { minimise: place, authority: 0.8 }`,
};

describe("plants at the edges", () => {
  it("nothing unknown, no rotation, no translation: holds, with no residual channel", async () => {
    const { summary } = await outcomeOf(CART);
    expect(summary.verdict.holds, summary.verdict.text).toBe(true);
    expect(summary.residual.channels).toEqual([]);
    expect(Object.keys(learnedOf(summary).margins).sort()).toEqual(["place", "speed"]);
    expect(summary.cautions.join(" ")).not.toContain("found nothing better than");
    // a constant push d on the place alone moves it by d / rate at least, whatever the feedback
    const { margins, rate } = learnedOf(summary);
    expect(margins.place!).toBeGreaterThanOrEqual((0.99 * summary.disturbance.channels[0]!.bound) / rate!);
  });

  it("as many inputs as states: every rate is usable, and the tube still has one", async () => {
    const { summary, page } = await outcomeOf({
      states: ["a", "b"],
      inputs: ["u", "v"],
      rates: ([a, b], [u, v]) => [u! - 0.4 * a!, v! + 0.1 * a! - 0.2 * b!],
      plant: `
states:
  a: { unit: m, envelope: [-2, 2] }
  b: { unit: m, envelope: [-3, 3] }
inputs:
  u: { unit: m/s, range: [-1, 1] }
  v: { unit: m/s, range: [-1, 1] }
rates:
  a: u - 0.2 * a
  b: v + 0.1 * a - 0.2 * b
unknown:
  - { rate: a, from: [a] }
leftover:
  aPush: { unit: m/s, on: { a: 1 } }
  bPush: { unit: m/s, on: { b: 1 } }
margin: { minimise: a, authority: 0.5 }`,
    });
    expect(summary.verdict.holds, summary.verdict.text).toBe(true);
    expect(learnedOf(summary).rate).toBeGreaterThan(0);
    expect(oddWords(page)).toEqual([]);
  });

  it("one state", async () => {
    const { summary, page } = await outcomeOf({
      states: ["level"],
      inputs: ["flow"],
      rates: ([level], [flow]) => [flow! - 0.5 * level!],
      plant: `
states:
  level: { unit: m, envelope: [-2, 2] }
inputs:
  flow: { unit: m/s, range: [-1, 1] }
rates:
  level: flow - 0.5 * level
leftover:
  leak: { unit: m/s, on: { level: 1 } }
margin: { minimise: level, authority: 0.5 }`,
    });
    expect(summary.verdict.holds, summary.verdict.text).toBe(true);
    expect(Object.keys(learnedOf(summary).margins)).toEqual(["level"]);
    expect(oddWords(page)).toEqual([]);
  });

  it("a state that grows and that no input reaches: no number, with the reason", async () => {
    const { end, summary, page } = await outcomeOf({
      states: ["place", "drift"],
      inputs: ["pull"],
      start: 0.02,
      rates: ([, drift], [pull]) => [pull!, 0.4 * drift!],
      plant: `
states:
  place: { unit: m, envelope: [-2, 2] }
  drift: { unit: m, envelope: [-1, 1] }
inputs:
  pull: { unit: m/s, range: [-1, 1] }
rates:
  place: pull
  drift: 0.4 * drift
leftover:
  push: { unit: m/s, on: { place: 1 } }
  driftPush: { unit: m/s, on: { drift: 1 } }
margin: { minimise: place, authority: 0.5 }`,
    });
    expect(end.status).toBe(3);
    expect(summary.verdict.holds).toBe(false);
    expect(summary.verdict.text).toContain("gives no margin: ");
    expect(summary.envelope.plans).toBeNull();
    for (const { name, status, reason, margins, authority, rate, tubeRadius } of summary.certificates) {
      expect(["fails", "absent"], name).toContain(status);
      expect(reason, name).not.toBe("");
      expect({ margins, authority, rate, tubeRadius }).toEqual({
        margins: {},
        authority: {},
        rate: null,
        tubeRadius: null,
      });
    }
    expect(page).toContain("gives no margin");
    expect(oddWords(page)).toEqual([]);
  });

  it("a rate that is asked for above what there is: the reason names it", async () => {
    const { summary } = await outcomeOf({
      ...CART,
      plant: CART.plant.replace("authority: 0.8", "authority: 0.8, rate: 50"),
    });
    expect(summary.verdict.holds).toBe(false);
    expect(summary.verdict.text).toContain("50 1/s was asked for");
  });
});
