// How long a whole proof takes, all quantities of the tube included, in one thread: boxes, boxes a second and CPU seconds go
// to proofRecord.json. Artifacts were learned by Fairlead from the bundled logs (submersible: an invented plant without
// logs, its metric learned on the prior) and rounded to seven digits; they are benchmark cases, not results to use.
import { readFileSync, writeFileSync } from "node:fs";
import { cpus } from "node:os";
import { resolve } from "node:path";
import { afterAll, describe, expect, it } from "vitest";
import type { ResidualFile } from "../../src/model/controlAffine.js";
import { fittedModel } from "../../src/model/fittedModel.js";
import { type DualMetricFile, dualMetric } from "../../src/nets/dualMetric.js";
import type { Plant } from "../../src/plant/plant.js";
import { readPlant } from "../../src/plant/readPlant.js";
import { prove } from "../../src/verify/proof/prove.js";
import { recheck } from "../../src/verify/proof/recheck.js";
import { sampledClaims } from "../../src/verify/proof/sampledClaims.js";
import type { MarginDirection } from "../../src/verify/spread.js";
import { survey } from "../../src/verify/survey.js";

const here = import.meta.dirname;
const readAt = (path: string): Plant => {
  const result = readPlant(readFileSync(path, "utf8"), path);
  if (!result.ok) throw new Error(JSON.stringify(result.problems));
  return result.plant;
};

/** plant, artifacts, most CPU seconds: three times what was measured, or the project's own limit where that is less. */
const CASES = [
  { plant: resolve(here, "../../configs/orchard-rover.yaml"), artifacts: "orchard-rover", ceiling: 5 },
  { plant: resolve(here, "../../configs/yard-crane.yaml"), artifacts: "yard-crane", ceiling: 5 },
  { plant: resolve(here, "../../configs/survey-boat.yaml"), artifacts: "survey-boat", ceiling: 15 },
  { plant: resolve(here, "../../configs/survey-boat.yaml"), artifacts: "survey-boat-wide", ceiling: 25 },
  { plant: resolve(here, "proofArtifacts/submersible.yaml"), artifacts: "submersible", ceiling: 25 },
  { plant: resolve(here, "proofArtifacts/submersible.yaml"), artifacts: "submersible-wide", ceiling: 50 },
];

const record: unknown[] = [];
afterAll(() => {
  const file = { processor: cpus()[0]?.model ?? "unknown", node: globalThis.process.version, cases: record };
  writeFileSync(resolve(here, "proofRecord.json"), `${JSON.stringify(file, null, 2)}\n`);
});

describe("whole proofs, one thread, gap 5 % and 1 %", () => {
  for (const { plant: path, artifacts, ceiling } of CASES) {
    it(artifacts, async () => {
      const plant = readAt(path);
      const saved = JSON.parse(readFileSync(resolve(here, `proofArtifacts/${artifacts}.json`), "utf8")) as {
        residual: ResidualFile;
        wbar: number[];
        metric: DualMetricFile;
      };
      const model = fittedModel(plant, saved.residual);
      const seen = survey(model, dualMetric(saved.metric), { points: 4096, starts: 8 });
      const directions: MarginDirection[] = [
        ...plant.states.map((_, state) => ({ kind: "state" as const, state })),
        ...(model.rotation === null ? [] : (["along", "across"] as const).map((kind) => ({ kind, headingError: 0.3 }))),
      ];
      for (const gap of [0.05, 0.01]) {
        const claims = sampledClaims(seen, {
          wbar: saved.wbar,
          directions,
          tubeRate: 0.95 * seen.worst.rate,
          gap,
        });
        const subject = { plant, residual: saved.residual, metric: saved.metric };
        const cpu = globalThis.process.cpuUsage();
        const result = await prove(subject, claims);
        const used = globalThis.process.cpuUsage(cpu);
        const seconds = (used.user + used.system) / 1e6;
        expect(result.status).toBe("proved");
        expect(result.provedRate).toBeGreaterThanOrEqual((1 - gap) * seen.worst.rate);
        const again = globalThis.process.cpuUsage();
        expect(recheck(subject, claims, result.leaves).holds).toBe(true);
        const rechecked = globalThis.process.cpuUsage(again);
        record.push({
          case: artifacts,
          dimensions: model.active.length,
          width: saved.metric.kind === "network" ? saved.metric.mlp.layers[0]!.bias.length : 0,
          gap,
          sampledRate: seen.worst.rate,
          provedRate: result.provedRate,
          boxes: result.boxes,
          leaves: result.leaves.count,
          cpuSeconds: seconds,
          boxesPerSecond: Math.round(result.boxes / seconds),
          recheckCpuSeconds: (rechecked.user + rechecked.system) / 1e6,
          ceilingSeconds: ceiling,
        });
        expect(seconds).toBeLessThan(ceiling);
      }
    });
  }
});
