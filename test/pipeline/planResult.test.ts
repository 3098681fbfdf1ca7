import { describe, expect, it } from "vitest";
import { fittedModel } from "../../src/model/fittedModel.js";
import type { CertifiedTube } from "../../src/pipeline/certifyMetric.js";
import type { PlanContext } from "../../src/pipeline/planContext.js";
import { marginNames, planRows } from "../../src/pipeline/planResult.js";
import type { PlanTubeStep } from "../../src/tube/planTube.js";
import { ROVER } from "../plant/examples.js";
import { plantOf } from "../plant/reading.js";

const plant = plantOf(ROVER); // position's half-range 30 m, heading's 180 deg
const headingError = 0.1;
const W = [0.04, 0.09, 0.01, 0.25, 0.09, 0.04, 0.09];
const tube: CertifiedTube = {
  rate: 0.5,
  radius: 0.1,
  pushes: [0.03, 0.02],
  sigma: 0.05,
  authority: 0.3,
  authorityDensity: 6,
  claimedRate: 0.6,
  spreads: [
    { direction: { kind: "state", state: 0 }, value: W[0]! },
    { direction: { kind: "state", state: 1 }, value: W[1]! },
    { direction: { kind: "state", state: 2 }, value: W[2]! },
    { direction: { kind: "state", state: 3 }, value: W[3]! },
    { direction: { kind: "planar" }, value: W[4]! },
    { direction: { kind: "along", headingError }, value: W[5]! },
    { direction: { kind: "across", headingError }, value: W[6]! },
  ],
  headingError,
};

/** Two rows of two steps each. */
function rowsOf(radii: readonly number[]) {
  const steps = radii.map(
    (radius, k): PlanTubeStep => ({
      radius,
      sigma: 0.01 * (k + 1),
      authority: radius,
      bounds: { rate: 0.9 - 0.1 * k, pushes: [], widths: [], spreads: W, authority: 2 },
      lower: new Float64Array(1),
      upper: new Float64Array(1),
    }),
  );
  const context = {
    plant,
    model: fittedModel(plant, null),
    tube,
    plan: { time: Float64Array.of(3, 3.5, 4) },
    motion: { steps: new Array(4), sampleOf: [0, 0, 1, 1] },
  } as unknown as PlanContext;
  return planRows(context, { steps, end: null });
}

describe("rows of a tube along a plan", () => {
  it("are the worst of their steps, in the plant's units", () => {
    expect(marginNames(plant, tube).map(({ name, unit }) => `${name} ${unit}`)).toEqual([
      ...["px m", "py m", "heading deg", "speed m/s", "planar m", "along m", "across m"],
    ]);
    const [first, second] = rowsOf([0.02, 0.03, 0.025, 0.01]);
    expect(first).toMatchObject({ time: 3, until: 3.5, radius: 0.03, sigma: 0.02, authority: 0.03 });
    expect(first!.provedRate).toBeCloseTo(0.8, 12);
    expect(second).toMatchObject({ time: 3.5, until: 4, radius: 0.025, sigma: 0.04 });
    // R sqrt(c^T W c) times the half-range: 30 m, 180 deg, 0.9 m/s
    for (const [i, half] of [30, 30, 180, 0.9, 30, 30, 30].entries())
      expect(first!.margins[i]).toBeCloseTo(0.03 * Math.sqrt(W[i]!) * half, 12);
  });

  it("have no margin along and across where the heading may be further off than those cover", () => {
    // heading error = R sqrt(W_hh) pi: over 0.1 rad from R = 0.3183 on
    const [first, second] = rowsOf([0.318, 0.31, 0.3, 0.319]);
    expect(first!.margins.slice(5)).not.toContain(null);
    expect(second!.margins.slice(5)).toEqual([null, null]);
    expect(second!.margins[4]).toBeCloseTo(0.319 * 0.3 * 30, 12);
  });

  it("leave out a row that ends early", () => {
    expect(rowsOf([0.02, 0.03, 0.025])).toHaveLength(1);
    expect(rowsOf([0.02, 0.03])).toHaveLength(1);
  });
});
