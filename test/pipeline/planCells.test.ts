import { beforeAll, describe, expect, it } from "vitest";
import { fittedModel } from "../../src/model/fittedModel.js";
import { type DualMetricFile, dualMetric } from "../../src/nets/dualMetric.js";
import { seededRandom } from "../../src/num/random.js";
import { type PlanCells, planCells } from "../../src/pipeline/planCells.js";
import type { LocalBounds } from "../../src/tube/planTube.js";
import { condition } from "../../src/verify/condition.js";
import { aloneIn, type ProofClaims } from "../../src/verify/proof/claims.js";
import { prove } from "../../src/verify/proof/prove.js";
import { handPlant } from "../verify/proofPlants.js";

// Everything varies over the box: the rate with x and v, the pushes against each other, the authority with B.
const plant = handPlant({
  states: { x: [-1, 1], v: [-1, 1] },
  inputs: { u: [-3, 3] },
  f: ["v * (1 + 0.2 * x)", "-x - v - 0.3 * x * x * x"],
  B: [["0"], ["1 + 0.3 * x"]],
  G: [
    ["0.5", "0"],
    ["1 + 0.5 * x", "1 - 0.5 * x"],
  ],
});
// W about [[1, -0.8], [-0.8, 2]] in the middle, larger to the right: 0.1 I + L L^T, L moved by tanh(x / 2)
const metric: DualMetricFile = {
  kind: "network",
  n: 2,
  w0: 0.1,
  features: [{ state: 0, map: "value", center: 0, half: 1 }],
  mlp: {
    layers: [
      { weights: [[0.5]], bias: [0] },
      { weights: [[0.1], [0], [0.15]], bias: [0.9487, -0.8433, 1.0903] },
    ],
  },
};
const certificate = { plant, residual: null, metric };
const wbar = [0.02, 0.03];
const here = condition(fittedModel(plant, null), dualMetric(certificate.metric));
/** Largest authority density on a grid of the whole box. */
function densest(rate: number): number {
  let most = 0;
  for (let i = 0; i <= 40; i++) {
    for (let j = 0; j <= 40; j++) {
      here.moveTo(Float64Array.of(i / 20 - 1, j / 20 - 1));
      most = Math.max(most, here.authorityDensity(rate));
    }
  }
  return most;
}
const claims: ProofClaims = {
  rate: 0.4,
  pushes: aloneIn(wbar).map((alone) => ({ wbar: alone, most: 1 })),
  spreads: [0, 1].map((state) => ({ direction: { kind: "state", state }, most: 3 })),
  authority: { rate: 0.3, most: 1.05 * densest(0.3) },
};
let cells: PlanCells;
beforeAll(async () => {
  const result = await prove(certificate, claims);
  expect(result.status).toBe("proved");
  cells = planCells(certificate, claims, result.leaves, [0, 1]);
});

const random = seededRandom(5);
const boxes = Array.from({ length: 40 }, () => {
  const centre = [random.uniform() - 0.5, random.uniform() - 0.5];
  const half = [0.3 * random.uniform(), 0.3 * random.uniform()];
  return {
    lower: Float64Array.from(centre, (c, i) => c - half[i]!),
    upper: Float64Array.from(centre, (c, i) => c + half[i]!),
  };
});
const alone = wbar.map((bound, c) => Float64Array.from(wbar, (_, i) => (i === c ? bound : 0)));

/** Worst found at random states of a box, by code that shares nothing with the proof. */
function sampled({ lower, upper }: (typeof boxes)[number], rate: number): LocalBounds {
  const worst = { rate: Number.POSITIVE_INFINITY, pushes: [0, 0], widths: [0, 0], authority: 0 };
  for (let k = 0; k < 60; k++) {
    here.moveTo(lower.map((low, i) => low + random.uniform() * (upper[i]! - low)));
    worst.rate = Math.min(worst.rate, here.rate().rate);
    worst.authority = Math.max(worst.authority, here.authorityDensity(rate));
    worst.pushes = worst.pushes.map((value, c) => Math.max(value, here.sigma(alone[c]!)));
    worst.widths = worst.widths.map((value, i) => Math.max(value, here.W[i * 3]!));
  }
  return { ...worst, spreads: worst.widths };
}

function covers(bounds: LocalBounds, found: LocalBounds): void {
  expect(bounds.rate).toBeLessThanOrEqual(found.rate);
  for (const name of ["pushes", "widths", "spreads"] as const)
    for (const [i, value] of found[name].entries()) expect(bounds[name][i]).toBeGreaterThanOrEqual(value * (1 - 1e-12));
  expect(bounds.authority).toBeGreaterThanOrEqual(found.authority * (1 - 1e-12));
}

describe("proved bounds around a plan", () => {
  it("cover every state of a box", () => {
    const authorities = boxes.map((box) => {
      const bounds = cells.local(box.lower, box.upper)!;
      covers(bounds, sampled(box, 0.3));
      return bounds.authority;
    });
    // and say more than the claim does
    expect(Math.min(...authorities)).toBeLessThan(0.8 * Math.max(...authorities));
  });

  it("cover every state of a box for a law of another rate", () => {
    const local = cells.localAt(0.45, 200);
    let shown = 0;
    for (const box of boxes) {
      const bounds = local(box.lower, box.upper);
      // only where the cells contract clearly faster must the authority have a bound
      if (bounds === null) expect(cells.local(box.lower, box.upper)!.rate).toBeLessThan(0.55);
      else covers(bounds, sampled(box, 0.45));
      if (bounds !== null) shown++;
    }
    expect(shown).toBeGreaterThan(10);
    // where the authority may be no larger than it ever is, nothing counts as proved
    expect(cells.localAt(0.45, 0.01)(boxes[0]!.lower, boxes[0]!.upper)).toBeNull();
  });

  it("get no better as a box grows, and are local", () => {
    const small = cells.local(Float64Array.of(-0.5, 0), Float64Array.of(-0.45, 0.05))!;
    const large = cells.local(Float64Array.of(-0.5, 0), Float64Array.of(0.5, 0.4))!;
    covers(large, small);
    expect(small.pushes[0]).toBeLessThan(0.85 * large.pushes[0]!);
    here.moveTo(Float64Array.of(-0.475, 0.025));
    for (const [c, bound] of small.pushes.entries()) expect(bound).toBeLessThan(1.1 * here.sigma(alone[c]!));
    for (const [i, width] of small.widths.entries()) {
      expect(width).toBeLessThan(1.1 * here.W[i * 3]!);
      expect(large.widths[i]!).toBeGreaterThan(1.05 * width);
    }
  });

  it("are none beyond the boxes of the proof", () => {
    expect(cells.local(Float64Array.of(1.5, 0), Float64Array.of(1.6, 0.1))).toBeNull();
    expect(cells.unproved(Float64Array.of(0, 0), Float64Array.of(0.1, 0.1))).toBeNull();
  });
});
