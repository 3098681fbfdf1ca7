// Whole proofs of learned certificates against float64 code that shares nothing with the prover: at every random point each
// quantity keeps the bound of the cell that holds the point.
import { readFileSync } from "node:fs";
import { resolve } from "node:path";
import { describe, expect, it } from "vitest";
import type { ResidualFile } from "../../src/model/controlAffine.js";
import { fittedModel } from "../../src/model/fittedModel.js";
import { type DualMetricFile, dualMetric } from "../../src/nets/dualMetric.js";
import { seededRandom } from "../../src/num/random.js";
import { readPlant } from "../../src/plant/readPlant.js";
import { leafSearch } from "../../src/verify/proof/leafSearch.js";
import { prove } from "../../src/verify/proof/prove.js";
import { sampledClaims } from "../../src/verify/proof/sampledClaims.js";
import { type MarginDirection, spread } from "../../src/verify/spread.js";
import { survey } from "../../src/verify/survey.js";

const POINTS = 20_000;
const bench = resolve(import.meta.dirname, "../bench/proofArtifacts");
const configs = resolve(import.meta.dirname, "../../configs");

describe("bounds of proved cells at random points", () => {
  for (const [name, path] of [
    ["orchard-rover", resolve(configs, "orchard-rover.yaml")],
    ["yard-crane", resolve(configs, "yard-crane.yaml")],
    ["survey-boat", resolve(configs, "survey-boat.yaml")],
    ["submersible", resolve(bench, "submersible.yaml")],
  ] as const) {
    it(name, async () => {
      const read = readPlant(readFileSync(path, "utf8"), path);
      if (!read.ok) throw new Error(JSON.stringify(read.problems));
      const { plant } = read;
      const { residual, wbar, metric } = JSON.parse(readFileSync(resolve(bench, `${name}.json`), "utf8")) as {
        residual: ResidualFile;
        wbar: number[];
        metric: DualMetricFile;
      };
      const model = fittedModel(plant, residual);
      const seen = survey(model, dualMetric(metric), { points: 4096, starts: 8 });
      const here = seen.condition;
      const tubeRate = 0.95 * seen.worst.rate;
      const directions: MarginDirection[] = [
        ...plant.states.map((_, state) => ({ kind: "state" as const, state })),
        ...(model.rotation === null ? [] : (["along", "across"] as const).map((kind) => ({ kind, headingError: 0.3 }))),
      ];
      const claims = sampledClaims(seen, { wbar, directions, tubeRate, gap: 0.01 });
      const result = await prove({ plant, residual, metric }, claims);
      expect(result.status).toBe("proved");
      const search = leafSearch(result.leaves, claims);
      const random = seededRandom(77);
      for (let i = 0; i < POINTS; i++) {
        const at = Float64Array.from(model.active, () => 2 * random.uniform() - 1);
        const bounds = search.worst(at, at)!;
        here.moveTo(at);
        expect(here.rate().rate).toBeGreaterThanOrEqual(bounds.rate - 1e-10);
        claims.pushes.forEach((push, c) => {
          expect(here.sigma(Float64Array.from(push.wbar))).toBeLessThanOrEqual(bounds.pushes[c]! * (1 + 1e-10));
        });
        expect(here.authorityDensity(tubeRate)).toBeLessThanOrEqual(bounds.authority * (1 + 1e-8));
        directions.forEach((direction, s) => {
          expect(spread(here.W, model.n, model.rotation, direction)).toBeLessThanOrEqual(
            bounds.spreads[s]! * (1 + 1e-10),
          );
        });
      }
    });
  }
});
