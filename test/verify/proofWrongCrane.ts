// Certificates of the yard crane, learned from its bundled logs, that were spoilt on purpose; and its table of boxes.
import { readFileSync } from "node:fs";
import { resolve } from "node:path";
import type { ResidualFile } from "../../src/model/controlAffine.js";
import { fittedModel } from "../../src/model/fittedModel.js";
import { type DualMetricFile, dualMetric } from "../../src/nets/dualMetric.js";
import type { Mlp } from "../../src/nets/mlp.js";
import { seededRandom } from "../../src/num/random.js";
import type { Plant } from "../../src/plant/plant.js";
import { readPlant } from "../../src/plant/readPlant.js";
import type { ProofSubject } from "../../src/verify/proof/claims.js";
import type { LeafTable } from "../../src/verify/proof/leafTable.js";
import { survey } from "../../src/verify/survey.js";
import { IDENTITY2, only, type Wrong } from "./proofWrongHand.js";

// The yard crane as shipped, with artifacts learned from its logs.
const cranePath = resolve(import.meta.dirname, "../../configs/yard-crane.yaml");
const craneText = readFileSync(cranePath, "utf8");
export const saved = JSON.parse(
  readFileSync(resolve(import.meta.dirname, "../bench/proofArtifacts/yard-crane.json"), "utf8"),
) as {
  residual: ResidualFile;
  wbar: number[];
  metric: Extract<DualMetricFile, { kind: "network" }>;
};
function crane(change: (text: string) => string = (text) => text): Plant {
  const result = readPlant(change(craneText), cranePath);
  if (!result.ok) throw new Error(JSON.stringify(result.problems));
  return result.plant;
}
export const craneRates = survey(fittedModel(crane(), saved.residual), dualMetric(saved.metric), {
  points: 2048,
  starts: 4,
});
export const CRANE_RATE = craneRates.worst.rate;
export const onlyCrane = only(CRANE_RATE * 0.98);
const withResidual = (
  change: (term: ResidualFile["terms"][number]) => ResidualFile["terms"][number],
): ResidualFile => ({
  terms: saved.residual.terms.map(change),
});
export const craneSubject = (change: Partial<ProofSubject>): ProofSubject => ({ plant: crane(), ...saved, ...change });
const lastLayer = (mlp: Mlp, change: (w: number, row: number) => number): Mlp => ({
  layers: mlp.layers.map((layer, l) =>
    l < mlp.layers.length - 1
      ? layer
      : {
          weights: layer.weights.map((row, i) => row.map((w) => change(w, i))),
          bias: layer.bias.map((b, i) => change(b, i)),
        },
  ),
});
const withMetric = (change: (w: number, row: number) => number): DualMetricFile => ({
  ...saved.metric,
  mlp: lastLayer(saved.metric.mlp, change),
});
const stale: Wrong[] = [
  {
    name: "stale residual: twice the fitted one",
    subject: () => craneSubject({ residual: withResidual((t) => ({ ...t, outputScale: t.outputScale * 2 })) }),
    claims: onlyCrane,
  },
  {
    name: "stale residual: sign flipped",
    subject: () => craneSubject({ residual: withResidual((t) => ({ ...t, outputScale: -t.outputScale })) }),
    claims: onlyCrane,
  },
  { name: "residual left out", subject: () => craneSubject({ residual: null }), claims: onlyCrane },
  {
    name: "residual of a damped machine replaced by an undamped one",
    subject: () => craneSubject({ residual: withResidual((t) => (t.input === null ? { ...t, outputScale: 0 } : t)) }),
    claims: onlyCrane,
  },
  {
    name: "residual on the wrong rate",
    subject: () => craneSubject({ residual: withResidual((t) => (t.input === null ? { ...t, state: 2 } : t)) }),
    claims: onlyCrane,
  },
  {
    name: "unit slip: rope in feet",
    subject: () => craneSubject({ plant: crane((t) => t.replace("rope: 6.0", "rope: 19.7")) }),
    claims: onlyCrane,
  },
  {
    name: "unit slip: sway envelope in tenths",
    subject: () => craneSubject({ plant: crane((t) => t.replace("[-0.35, 0.35]", "[-1.35, 1.35]")) }),
    claims: onlyCrane,
  },
  {
    name: "unit slip: gravity in feet",
    subject: () => craneSubject({ plant: crane((t) => t.replace("9.80665", "32.174")) }),
    claims: onlyCrane,
  },
  {
    name: "a sign lost in the sway",
    subject: () => craneSubject({ plant: crane((t) => t.replace("swayRate: -(", "swayRate: (")) }),
    claims: onlyCrane,
  },
  {
    name: "inputs ten times what they were",
    subject: () => craneSubject({ plant: crane((t) => t.replace("[-0.8, 0.8]", "[-8, 8]")) }),
    claims: {
      ...onlyCrane,
      authority: { rate: CRANE_RATE * 0.9, most: craneRates.authorityDensity(CRANE_RATE * 0.9).value / 5 },
    },
  },
  {
    name: "leftover bounds twice as large as claimed for",
    subject: () => craneSubject({}),
    claims: {
      ...onlyCrane,
      pushes: [
        { wbar: saved.wbar.map((w) => 2 * w), most: 1.05 * craneRates.sigma(Float64Array.from(saved.wbar)).value },
      ],
    },
  },
  {
    name: "leftover channels swapped",
    subject: () => craneSubject({}),
    claims: {
      ...onlyCrane,
      pushes: [
        { wbar: [...saved.wbar].reverse(), most: 1.001 * craneRates.sigma(Float64Array.from(saved.wbar)).value },
      ],
    },
  },
  {
    name: "one factor of the metric halved",
    subject: () => craneSubject({ metric: withMetric((w, row) => (row === 2 ? w / 2 : w)) }),
    claims: onlyCrane,
  },
  {
    name: "sign of one factor of the metric flipped",
    subject: () => craneSubject({ metric: withMetric((w, row) => (row === 1 ? -w : w)) }),
    claims: onlyCrane,
  },
  {
    name: "rows of the metric in another order",
    subject: () => craneSubject({ metric: { ...saved.metric, features: [...saved.metric.features].reverse() } }),
    claims: onlyCrane,
  },
  {
    name: "a weight that is not a number",
    subject: () => craneSubject({ metric: withMetric((w, row) => (row === 3 ? Number.NaN : w)) }),
    claims: only(-1e3),
    end: "throws",
  },
  {
    name: "a weight that is infinite",
    subject: () => craneSubject({ metric: withMetric((w, row) => (row === 3 ? Number.POSITIVE_INFINITY : w)) }),
    claims: only(-1e3),
    end: "throws",
  },
  { name: "a negative w0", subject: () => craneSubject({ metric: { ...saved.metric, w0: -5 } }), claims: only(-1e3) },
  {
    name: "a metric of another plant",
    subject: () => craneSubject({ metric: IDENTITY2 }),
    claims: only(-1e3),
    end: "throws",
  },
  {
    name: "rate of the crane a per cent above the true one",
    subject: () => craneSubject({}),
    claims: only(CRANE_RATE * 1.01),
  },
  {
    name: "authority at the claimed rate itself",
    subject: () => craneSubject({}),
    claims: { ...onlyCrane, authority: { rate: CRANE_RATE * 1.0001, most: 1e6 } },
  },
];

/** Float32 weights that pass where the float64 ones fail: the claim stands between the two rates. */
const halfPrecision: Wrong[] = (() => {
  const random = seededRandom(31);
  const rateOf = (metric: DualMetricFile): number =>
    survey(fittedModel(crane(), saved.residual), dualMetric(metric), { points: 256, starts: 2 }).worst.rate;
  for (let trial = 0; trial < 20; trial++) {
    const factor = (): number => 1 + 1e-7 * (2 * random.uniform() - 1);
    const metric = withMetric((w) => w * factor());
    const rounded: DualMetricFile = {
      ...saved.metric,
      mlp: {
        layers: (metric as typeof saved.metric).mlp.layers.map(({ weights, bias }) => ({
          weights: weights.map((row) => row.map(Math.fround)),
          bias: bias.map(Math.fround),
        })),
      },
    };
    const [double, single] = [rateOf(metric), rateOf(rounded)];
    if (single > double + 1e-9)
      return [
        {
          name: "passes with float32 weights only",
          subject: () => craneSubject({ metric }),
          claims: only((single + double) / 2),
          end: "open" as const,
        },
      ];
  }
  return [];
})();

export const SPOILT: readonly Wrong[] = [...stale, ...halfPrecision];

const dropFirst = (t: LeafTable): LeafTable => ({
  ...t,
  count: t.count - 1,
  lower: t.lower.slice(t.dimension),
  upper: t.upper.slice(t.dimension),
  status: t.status.slice(1),
  claim: t.claim.slice(1),
  rate: t.rate.slice(1),
  pushes: t.pushes.slice(1),
  authority: t.authority.slice(1),
});
const at = <T extends Float64Array | Uint8Array>(values: T, index: number, change: (value: number) => number): T => {
  const copy = values.slice() as T;
  copy[index] = change(copy[index]!);
  return copy;
};
export const TAMPERED: [string, (table: LeafTable) => LeafTable][] = [
  ["a box is gone", dropFirst],
  ["a column is cut", (t) => ({ ...t, rate: t.rate.slice(1) })],
  ["a rate is raised", (t) => ({ ...t, rate: at(t.rate, 0, (v) => v * 1.2) })],
  ["a rate is not a number", (t) => ({ ...t, rate: at(t.rate, 0, () => Number.NaN) })],
  ["a rate is below the claim", (t) => ({ ...t, rate: at(t.rate, 0, () => 0.01) })],
  ["a push is lowered", (t) => ({ ...t, pushes: at(t.pushes, 0, (v) => v * 0.9) })],
  ["a push is above the claim", (t) => ({ ...t, pushes: at(t.pushes, 0, (v) => v * 2) })],
  ["the authority is above the claim", (t) => ({ ...t, authority: at(t.authority, 0, (v) => v * 2) })],
  ["the authority is lowered", (t) => ({ ...t, authority: at(t.authority, 0, (v) => v * 0.5) })],
  ["a face is moved out", (t) => ({ ...t, upper: at(t.upper, 0, (v) => v + 2 ** -45) })],
  ["a face is moved in", (t) => ({ ...t, lower: at(t.lower, 1, (v) => v + 2 ** -45) })],
  [
    "a box is there twice",
    (t) => ({
      ...t,
      lower: t.lower.slice().copyWithin(0, t.dimension, 2 * t.dimension),
      upper: t.upper.slice().copyWithin(0, t.dimension, 2 * t.dimension),
    }),
  ],
  [
    "the whole box is called one proved cell",
    (t) => ({
      ...dropAllButOne(t),
      lower: new Float64Array(t.dimension).fill(-1),
      upper: new Float64Array(t.dimension).fill(1),
    }),
  ],
  ["a status is none of the three", (t) => ({ ...t, status: at(t.status, 0, () => 7) })],
];
function dropAllButOne(t: LeafTable): LeafTable {
  let table = t;
  while (table.count > 1) table = dropFirst(table);
  return table;
}
