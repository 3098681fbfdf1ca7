import { mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { afterAll, beforeAll, describe, expect, it } from "vitest";
import { fittedModel } from "../../src/model/fittedModel.js";
import { dualMetric } from "../../src/nets/dualMetric.js";
import { seededRandom } from "../../src/num/random.js";
import type { CertifiedTube } from "../../src/pipeline/certifyMetric.js";
import { planTubeJob } from "../../src/pipeline/planStage.js";
import { tubeClaims } from "../../src/pipeline/proveTube.js";
import type { Plant } from "../../src/plant/plant.js";
import { steadyRadius } from "../../src/tube/tube.js";
import { condition } from "../../src/verify/condition.js";
import type { LeafTable } from "../../src/verify/proof/leafTable.js";
import { prove } from "../../src/verify/proof/prove.js";
import { handPlant } from "../verify/proofPlants.js";

/**
 * A slide with friction that is pushed harder by the disturbance at one end: x' = v, v' = -x - v + u + (1 + x/2) w. Scaled
 * states are the states, the scaled input is u / 3. By hand: with W = [[1, -0.8], [-0.8, 2]] the rate is -W12 / W11 = 0.8
 * (null of B^T is e1), M = W^-1, and the push is wbar (1 + x/2) sqrt(M22).
 */
const W = [1, -0.8, -0.8, 2];
const determinant = 2 - 0.64;
const M = [2 / determinant, 0.8 / determinant, 1 / determinant] as const;
const [rate, window, wbar] = [0.5, 0.5, 0.02];
const plain = handPlant({
  states: { x: [-1, 1], v: [-1, 1] },
  inputs: { u: [-3, 3] },
  f: ["v", "-x - v"],
  B: [["0"], ["1"]],
  G: [["0"], ["1 + x / 2"]],
});
const unit = { name: "1", factor: 1 };
const plant: Plant = {
  ...plain,
  logs: { ...plain.logs, states: ["x", "v"].map((column) => ({ column, unit })), inputs: [{ column: "u", unit }] },
};
const certificate = { plant, residual: null, metric: { kind: "constant", n: 2, W } } as const;
const sigma = 1.01 * wbar * 1.5 * Math.sqrt(M[2]);
const radius = steadyRadius({ window, sigma }, rate);
const here = condition(fittedModel(plant, null), dualMetric(certificate.metric));
here.moveTo(Float64Array.of(0, 0));
const authorityDensity = 1.05 * here.authorityDensity(rate);
const tube: CertifiedTube = {
  rate,
  radius,
  pushes: [sigma],
  sigma,
  authority: (radius * authorityDensity) / 2,
  authorityDensity,
  claimedRate: 0.75,
  spreads: [
    { direction: { kind: "state", state: 0 }, value: 1.01 },
    { direction: { kind: "state", state: 1 }, value: 2.02 },
  ],
  headingError: 0,
};
const folder = mkdtempSync(join(tmpdir(), "plan-"));
afterAll(() => rmSync(folder, { recursive: true }));
let boxes: LeafTable;
beforeAll(async () => {
  const result = await prove(certificate, tubeClaims(tube, [wbar]));
  expect(result.status).toBe("proved");
  boxes = result.leaves;
});

const STEP = 0.05;
const rates = (x: number, v: number, u: number, w: number): [number, number] => [v, -x - v + u + (1 + x / 2) * w];

/** The state after one step with the input held. */
function advanced(x: number, v: number, u: number): [number, number] {
  for (let s = 0; s < 50; s++) {
    const h = STEP / 50;
    const [a, b] = rates(x, v, u, 0);
    const [c, d] = rates(x + (h * a) / 2, v + (h * b) / 2, u, 0);
    const [e, f] = rates(x + (h * c) / 2, v + (h * d) / 2, u, 0);
    const [g, i] = rates(x + h * e, v + h * f, u, 0);
    x += (h / 6) * (a + 2 * c + 2 * e + g);
    v += (h / 6) * (b + 2 * d + 2 * f + i);
  }
  return [x, v];
}

/** Drives to -0.5, later to 0.5, by a law of its own; rows of [time, x, v, u], exact to 1e-9. */
function planRows(seconds: number, goal: (time: number) => number): number[][] {
  const rows: number[][] = [];
  let [x, v] = [-0.5, 0];
  for (let k = 0; k * STEP <= seconds + 1e-9; k++) {
    const u = x + v + 1.5 * (goal(k * STEP) - x) - 2.4 * v;
    rows.push([k * STEP, x, v, u]);
    [x, v] = advanced(x, v, u);
  }
  return rows;
}

/** Rows after one step of u = 2.999, then back by the law's own means. */
function pushed(time: number, x: number, v: number): number[][] {
  const rows: number[][] = [];
  for (let k = 0; k < 3; k++) {
    [x, v] = advanced(x, v, k === 0 ? 2.999 : -1);
    rows.push([time + (k + 1) * STEP, x, v, -1]);
  }
  return rows;
}

function planFile(name: string, rows: readonly (readonly number[])[]): string {
  const path = join(folder, name);
  writeFileSync(path, ["time,x,v,u", ...rows.map((row) => row.join(","))].join("\n"));
  return path;
}

const job = (planPath: string, over: Partial<Parameters<typeof planTubeJob>[0]> = {}) =>
  planTubeJob({
    certificate,
    tube,
    boxes,
    disturbance: { wbar: Float64Array.of(wbar), window },
    planPath,
    law: "fixed",
    fixedHolds: true,
    ...over,
  });

const column = (columns: Awaited<ReturnType<typeof job>>["columns"], name: string): Float64Array =>
  columns.find((entry) => entry.name === name)!.values as Float64Array;

const withLimit = (authorityLimit: number): Plant => ({
  ...plant,
  settings: { ...plant.settings, authorityLimit },
});

const there = (time: number): number => (time < 20 ? -0.5 : 0.5);

describe("the tube along a plan of a slide", () => {
  it("is narrower where less pushes, never wider than the fixed tube, and close to the closed form", async () => {
    // there and back: the largest margin is not the last
    const rows = planRows(70, (time) => (time < 50 ? there(time) : -0.5));
    const { summary, columns, page } = await job(planFile("there.csv", rows));
    expect(summary.status).toBe("whole");
    expect(summary.problems).toEqual([]);
    const margin = column(columns, "margin.x");
    expect(margin).toHaveLength(rows.length - 1);
    for (const name of ["margin.x", "margin.v"])
      expect(Math.max(...column(columns, name))).toBeLessThanOrEqual(
        summary.margins.find((entry) => `margin.${entry.name}` === name)!.fixed! * (1 + 1e-9),
      );
    // at rest at -0.5 the tube reaches x = -0.5 + margin; cells are 1/8 wide and faces belong to both sides
    for (const [time, at] of [
      [19, -0.5],
      [49, 0.5],
    ] as const) {
      const found = margin[Math.round(time / STEP)]!;
      const radiusFor = (x: number): number =>
        steadyRadius({ window, sigma: wbar * (1 + x / 2) * Math.sqrt(M[2]) }, rate);
      expect(found).toBeGreaterThan(radiusFor(at + found));
      expect(found).toBeLessThan(1.01 * radiusFor(at + found + 0.25));
    }
    const asked = summary.margins.find(({ name }) => name === "x")!;
    expect(asked.largest).toBe(Math.max(...margin));
    expect(asked.mean).toBeCloseTo(margin.reduce((sum, value) => sum + value, 0) / margin.length, 9);
    expect(summary.text).toMatch(/margin 'x' is at most 0\.0\d+ all along the plan/);
    expect(page).toContain("Holds along the whole plan");
    expect(column(columns, "plan.x")[0]).toBe(-0.5);
  });

  it("is narrower at a rate of the plan's own, proved around it and within the authority limit", async () => {
    const path = planFile("faster.csv", planRows(40, there));
    const [usual, faster, limited] = [
      await job(path),
      await job(path, { law: "plan" }),
      await job(path, { law: "plan", certificate: { ...certificate, plant: withLimit(0.05) } }),
    ];
    expect(usual.summary.rate).toBe(rate);
    expect(faster.summary.rate).toBeGreaterThan(1.3 * rate);
    // by hand the rate is 0.8 everywhere
    expect(faster.summary.rate).toBeLessThan(0.8);
    expect(faster.summary.text).not.toBe(usual.summary.text);
    expect(faster.summary.law).toContain("a rate of this plan's own");
    const [slow, fast] = [usual, faster].map(({ columns }) => column(columns, "margin.x"));
    for (const [k, margin] of fast!.entries()) expect(margin).toBeLessThanOrEqual(slow![k]!);
    expect(fast!.at(-1)!).toBeLessThan(0.85 * slow!.at(-1)!);
    expect(limited.summary.rate).toBeLessThan(faster.summary.rate);
    expect(limited.summary.authority.largest!).toBeLessThanOrEqual(0.05);
    // the density at the law's rate, sampled by other code in the box of the plan, stays under what is proved
    const authority = column(faster.columns, "authority").at(-1)!;
    here.moveTo(Float64Array.of(0.5, 0));
    const density = here.authorityDensity(faster.summary.rate);
    expect((column(faster.columns, "radius").at(-1)! * density) / 2).toBeLessThanOrEqual(authority);
  });

  it.each(["fixed", "plan"] as const)("contains disturbed runs under the least-norm law, rate %s", async (law) => {
    const rows = planRows(30, there);
    const { columns, summary } = await job(planFile("runs.csv", rows), { law });
    const [marginX, marginV] = [column(columns, "margin.x"), column(columns, "margin.v")];
    const [radii, authority] = [column(columns, "radius"), column(columns, "authority")];
    const random = seededRandom(3);
    const h = STEP / 25;
    let [nearest, asked] = [0, 0];
    for (let run = 0; run < 40; run++) {
      const width = h * (2 + random.integer(60));
      const phase = window * random.uniform();
      const one = run % 2 === 0 ? 1 : -1;
      let [x, v] = [-0.5, 0];
      let [px, pv] = [-0.5, 0];
      for (const [k, row] of rows.slice(0, -1).entries()) {
        const u = row[3]!;
        [px, pv] = [row[1]!, row[2]!];
        for (let s = 0; s < 25; s++) {
          const t = row[0]! + s * h + phase;
          const w = t - window * Math.floor(t / window) < width - 1e-9 ? (one * wbar * window) / width : 0;
          const [ex, ev] = [x - px, v - pv];
          const [gx, gv] = [M[0] * ex + M[1] * ev, M[1] * ex + M[2] * ev];
          const [ax, av] = rates(x, v, u, 0);
          const [bx, bv] = rates(px, pv, u, 0);
          // e^T M (xdot - xdot*) <= -lambda e^T M e, the least |du| that does it
          const excess = gx * (ax - bx) + gv * (av - bv) + summary.rate * (ex * gx + ev * gv);
          const du = excess > 0 && gv !== 0 ? -excess / gv : 0;
          asked = Math.max(asked, Math.abs(du) / 3 / authority[k]!);
          const [dx, dv] = rates(x, v, u + du, w);
          x += h * dx;
          v += h * dv;
          px += h * bx;
          pv += h * bv;
        }
        const [ex, ev] = [x - px, v - pv];
        const distance = Math.sqrt(M[0] * ex ** 2 + 2 * M[1] * ex * ev + M[2] * ev ** 2);
        nearest = Math.max(nearest, distance / radii[k]!, Math.abs(ex) / marginX[k]!, Math.abs(ev) / marginV[k]!);
      }
    }
    expect(nearest).toBeLessThanOrEqual(1);
    expect(asked).toBeLessThanOrEqual(1);
    expect(nearest).toBeGreaterThan(0.5);
  });

  it("doubles with the disturbance where the cells do not change", async () => {
    const rows = planRows(10, () => -0.5);
    const path = planFile("still.csv", rows);
    const small = await job(path, { disturbance: { wbar: Float64Array.of(wbar / 8), window } });
    const double = await job(path, { disturbance: { wbar: Float64Array.of(wbar / 4), window } });
    const [a, b] = [small, double].map(({ columns }) => column(columns, "margin.v"));
    expect(b!.at(-1)! / a!.at(-1)!).toBeCloseTo(2, 9);
  });

  it("refuses a plan outside the envelope and one that is no motion of the model, by name, time and value", async () => {
    const rows = planRows(12, () => -0.5).map(([time, x, v, u]) => [time!, x!, v!, time! > 5 ? 3.2 : u!]);
    const { summary, columns, page } = await job(planFile("wrong.csv", rows));
    expect(summary.status).toBe("refused");
    expect(summary.problems.map(({ kind, name }) => [kind, name])).toEqual([
      ["input", "u"],
      ["motion", "v"],
    ]);
    expect(summary.text).toMatch(/u is 3\.2 at 5\.05 s \(row 102\); the certificate covers -3 to 3/);
    expect(column(columns, "margin.x")).toHaveLength(0);
    expect(page).toContain("Plan refused");
    expect(page).not.toContain("<figure");
  });

  it("gives no number from where it touches a box without proof", async () => {
    const status = boxes.status.slice();
    const claim = boxes.claim.slice();
    for (let k = 0; k < boxes.count; k++) {
      if (boxes.upper[2 * k]! <= 0.25) continue;
      status[k] = 2;
      claim[k] = 1;
    }
    const part = { ...boxes, status, claim };
    const quiet = await job(
      planFile(
        "quiet.csv",
        planRows(10, () => -0.5),
      ),
      { boxes: part, fixedHolds: false },
    );
    expect(quiet.summary.status).toBe("whole");
    expect(quiet.summary.text).toMatch(/the certificate fails elsewhere and gives no fixed margin/);
    expect(quiet.summary.margins.map(({ fixed }) => fixed)).toEqual([null, null]);
    // at several speeds, so that it ends in the first and in the second half of a row
    for (const goal of [0.35, 0.4, 0.45, 0.5, 0.6]) {
      const rows = planRows(40, (time) => (time < 20 ? -0.5 : goal));
      const { summary, columns } = await job(planFile("touch.csv", rows), { boxes: part });
      const reaches = rows.find(([, x]) => x! > 0.25)![0]!;
      expect(summary.status).toBe("ends");
      expect(summary.end!.kind).toBe("cells");
      expect(summary.end!.time).toBeGreaterThan(20);
      expect(summary.end!.time).toBeLessThan(reaches);
      expect(summary.end!.text).toMatch(/refuted \(claim 'rate'\)/);
      expect(column(columns, "until").at(-1)!).toBeLessThanOrEqual(summary.end!.time);
    }
  });

  it("says which state or input runs out of room", async () => {
    const near = await job(
      planFile(
        "near.csv",
        planRows(60, (time) => (time < 20 ? -0.5 : 0.97)),
      ),
    );
    expect(near.summary.end).toMatchObject({ kind: "envelope" });
    expect(near.summary.text).toMatch(/the tube reaches x 0\.\d+ to 1\.\d+; the certificate covers x -1 to 1/);
    // full push forwards, as far as the slide goes: nothing is left for tracking
    const rows = planRows(20, () => -0.5).map((row) => row.slice());
    const jerk = rows.findIndex(([time]) => time! > 10);
    const [, x, v] = rows[jerk]!;
    rows.splice(jerk + 1, rows.length, ...pushed(rows[jerk]![0]!, x!, v!));
    rows[jerk]![3] = 2.999;
    const hard = await job(planFile("hard.csv", rows));
    expect(hard.summary.end).toMatchObject({ kind: "input" });
    expect(hard.summary.end!.time).toBeCloseTo(rows[jerk]![0]!, 9);
    expect(hard.summary.text).toMatch(/u 3 is planned and tracking may need \d[\d.]* % of its half-range/);
  });
});
