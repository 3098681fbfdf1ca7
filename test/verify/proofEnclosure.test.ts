import { readFileSync } from "node:fs";
import { resolve } from "node:path";
import { describe, expect, it } from "vitest";
import { newModelPoint, type ResidualFile } from "../../src/model/controlAffine.js";
import { fittedModel } from "../../src/model/fittedModel.js";
import { modelNodes } from "../../src/model/intervalModel.js";
import { dualMetric } from "../../src/nets/dualMetric.js";
import { featuresOf } from "../../src/nets/features.js";
import { metricField } from "../../src/nets/intervalMetric.js";
import { type Random, seededRandom } from "../../src/num/random.js";
import { type Node, taylorGraph, ZERO } from "../../src/num/taylorGraph.js";
import type { Plant } from "../../src/plant/plant.js";
import { readPlant } from "../../src/plant/readPlant.js";
import { condition } from "../../src/verify/condition.js";
import { cellProver } from "../../src/verify/proof/cellProver.js";
import { aloneIn, type ProofClaims } from "../../src/verify/proof/claims.js";
import { type MarginDirection, spread } from "../../src/verify/spread.js";
import { randomMlp } from "../support/randomSystem.js";
import { handPlant } from "./proofPlants.js";

function shipped(name: string): Plant {
  const path = resolve(import.meta.dirname, `../../configs/${name}.yaml`);
  const result = readPlant(readFileSync(path, "utf8"), path);
  if (!result.ok) throw new Error(JSON.stringify(result.problems));
  return result.plant;
}

/** Random artifacts of the right form: residual terms as declared, a network metric on the states it may see. */
function randomArtifacts(plant: Plant, random: Random) {
  const n = plant.states.length;
  const residual: ResidualFile = {
    terms: plant.unknowns.map(({ state, input, dependsOn }) => {
      const features = featuresOf(plant, dependsOn);
      return { state, input, features, mlp: randomMlp(random, [features.length, 6, 6, 1]), outputScale: 0.1 };
    }),
  };
  const features = featuresOf(plant, plant.settings.metricDependsOn);
  const metric = {
    kind: "network" as const,
    n,
    w0: 0.3,
    features,
    mlp: randomMlp(random, [features.length, 7, 7, (n * (n + 1)) / 2], 0.6),
  };
  return { residual, metric };
}

/** An invented machine with angles, every function of the plant file, an input gain that varies and two inputs. */
const CURLED = handPlant({
  states: { a: [-0.8, 0.9], b: [0.4, 2], c: [-1, 1] },
  inputs: { u: [-1, 3], v: [0, 2] },
  f: ["sin(a)*b - tanh(c)", "exp(-b)*abs(a + 0.2) + atan2(c, b)", "-sqrt(b)*c + log(b + 1)*cos(c)/b^1.5 + tan(a)*c^3"],
  B: [
    ["0", "0.3*c"],
    ["1 + 0.2*sin(c)", "a"],
    ["0.1*b", "2 - a^2"],
  ],
  G: [
    ["1", "a"],
    ["0", "b^2"],
    ["cos(c)", "0.1"],
  ],
});

const PLANTS: [string, Plant][] = [
  ["orchard-rover", shipped("orchard-rover")],
  ["yard-crane", shipped("yard-crane")],
  ["survey-boat", shipped("survey-boat")],
  ["curled", { ...CURLED, settings: { ...CURLED.settings, metricDependsOn: [0, 1] } }],
];

function randomCell(random: Random, d: number) {
  const radius = Float64Array.from({ length: d }, () => 0.2 * 2 ** -random.integer(12));
  const centre = radius.map((r) => (1 - r) * (2 * random.uniform() - 1));
  const lower = centre.map((c, i) => c - radius[i]!);
  const upper = centre.map((c, i) => c + radius[i]!);
  const point = (): Float64Array => lower.map((l, i) => l + random.uniform() * (upper[i]! - l));
  return { centre, radius, lower, upper, point };
}

describe("model and metric over cells hold the float64 values at random points", () => {
  for (const [name, plant] of PLANTS) {
    it(name, () => {
      const random = seededRandom(21);
      const { residual, metric } = randomArtifacts(plant, random);
      const model = fittedModel(plant, residual);
      const { n, m, p } = model;
      const graph = taylorGraph(model.active.length);
      const nodes = modelNodes(graph, plant, residual);
      const field = metricField(metric)(graph, nodes.z);
      const evaluator = graph.evaluator("cells");
      const W = dualMetric(metric);
      const out = newModelPoint(n, m, p);
      const [z, w, dw] = [new Float64Array(n), new Float64Array(n * n), new Float64Array(n * n * n)];
      const identity = Float64Array.from({ length: n * n }, (_, i) => (i % (n + 1) === 0 ? 1 : 0));
      const check = (node: Node, value: number, what: string): void => {
        const at = node === ZERO ? null : evaluator.at(node);
        const [low, high] =
          at === null ? [0, 0] : [evaluator.kernel.lower(evaluator.M, at), evaluator.kernel.upper(evaluator.M, at)];
        const slack = 1e-12 * (1 + Math.abs(value));
        expect(value >= low - slack && value <= high + slack, `${what}: ${value} in [${low}, ${high}]`).toBe(true);
      };
      const checkAll = (all: readonly Node[], values: Float64Array, what: string): void => {
        for (const [i, node] of all.entries()) check(node, values[i]!, `${what} ${i}`);
      };
      for (let cell = 0; cell < 25; cell++) {
        const { centre, radius, point } = randomCell(random, model.active.length);
        evaluator.run(centre, radius);
        for (let trial = 0; trial < 6; trial++) {
          model.embed(point(), z);
          model.evaluate(z, out);
          W.evaluate(z, identity, n, w, dw);
          checkAll(nodes.f, out.f, "f");
          checkAll(nodes.B, out.B, "B");
          checkAll(nodes.G, out.G, "G");
          for (const [j, block] of nodes.A.entries())
            checkAll(block, j === 0 ? out.dfdx : out.dBdx.subarray((j - 1) * n * n), `A${j}`);
          checkAll(field.W, w, "W");
          for (const { state, dW } of field.slopes) checkAll(dW, dw.subarray(state * n * n), `dW${state}`);
        }
      }
    });
  }
});

describe("bounds over cells hold the certificate's quantities at random points", () => {
  for (const [name, plant] of PLANTS) {
    it(name, () => {
      const random = seededRandom(22);
      const { residual, metric } = randomArtifacts(plant, random);
      const model = fittedModel(plant, residual);
      const here = condition(model, dualMetric(metric));
      const wbar = Array.from({ length: model.p }, () => 0.1 + random.uniform());
      const directions: MarginDirection[] = [
        ...Array.from({ length: model.n }, (_, state) => ({ kind: "state" as const, state })),
        ...(model.rotation === null
          ? []
          : [
              { kind: "planar" as const },
              { kind: "along" as const, headingError: 0.3 },
              { kind: "across" as const, headingError: 0.2 },
            ]),
      ];
      let proved = 0;
      for (let cell = 0; cell < 40; cell++) {
        const { centre, lower, upper, point } = randomCell(random, model.active.length);
        expect(here.moveTo(centre)).toBe(true);
        const rate = here.rate().rate;
        const slower = rate - 0.5 * (1 + Math.abs(rate));
        const loose = 1.3;
        const claims: ProofClaims = {
          rate: rate - 0.2 * (1 + Math.abs(rate)),
          pushes: [wbar, ...aloneIn(wbar)].map((bounds) => ({
            wbar: bounds,
            most: loose * here.sigma(Float64Array.from(bounds)),
          })),
          spreads: directions.map((direction) => ({
            direction,
            most: loose * spread(here.W, model.n, model.rotation, direction),
          })),
          authority: { rate: slower, most: loose * here.authorityDensity(slower) + 1 },
        };
        const prover = cellProver({ plant, residual, metric }, claims);
        const result = prover.examine(lower, upper);
        // at a point the enclosures are sharp: a claim just below what float64 says is refuted, just above it is not
        const sharp = (factor: number): ProofClaims => ({
          ...claims,
          rate: rate - factor * 1e-9 * (1 + Math.abs(rate)),
        });
        expect(cellProver({ plant, residual, metric }, sharp(-1)).refute(centre)).toBe("rate");
        expect(cellProver({ plant, residual, metric }, sharp(1)).refute(centre)).toBe(null);
        if (result.status !== "proved") continue;
        proved++;
        expect(prover.confirm(lower, upper, result.bounds)).toBe(true);
        for (let trial = 0; trial < 20; trial++) {
          here.moveTo(point());
          expect(here.rate().rate).toBeGreaterThanOrEqual(result.bounds.rate - 1e-9);
          claims.pushes.forEach((push, c) => {
            expect(here.sigma(Float64Array.from(push.wbar))).toBeLessThanOrEqual(result.bounds.pushes[c]! + 1e-9);
          });
          expect(here.authorityDensity(slower)).toBeLessThanOrEqual(result.bounds.authority * (1 + 1e-9));
          directions.forEach((direction, s) => {
            const value = spread(here.W, model.n, model.rotation, direction);
            expect(value).toBeLessThanOrEqual(result.bounds.spreads[s]! * (1 + 1e-12));
          });
        }
      }
      expect(proved).toBeGreaterThan(8);
    });
  }
});
