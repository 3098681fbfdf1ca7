// The margin meets the closed loop: the tracking law on the fitted models of the three bundled plants, along random plans
// inside the part of the envelope for plans, with disturbances at the bound: random corners, slow sines, constant corners,
// and an adversary that at each instant pushes the distance most. None may leave the tube. Figures: test/bench/stress.json.
import { readFileSync, writeFileSync } from "node:fs";
import { resolve } from "node:path";
import { afterAll, expect, it } from "vitest";
import { newModelPoint } from "../../src/model/controlAffine.js";
import { fittedModel } from "../../src/model/fittedModel.js";
import { dualMetric } from "../../src/nets/dualMetric.js";
import { type Random, seededRandom } from "../../src/num/random.js";
import { certifyMetric, SAMPLED_ALLOWANCE, tubeQuestion } from "../../src/pipeline/certifyMetric.js";
import { readPlant } from "../../src/plant/readPlant.js";
import { closedLoop } from "../../src/track/closedLoop.js";
import { type TrackingLaw, trackingLaw } from "../../src/track/trackingLaw.js";

const SEED = 5;
const RUNS = 200;
const [STEP, STEPS] = [0.02, 500];
const KINDS = ["adversary", "random", "constant", "sines"] as const;
const here = import.meta.dirname;
const figures: unknown[] = [];
afterAll(() => {
  const record = { seed: SEED, runsPerPlant: RUNS, seconds: STEP * STEPS, plants: figures };
  writeFileSync(resolve(here, "../bench/stress.json"), `${JSON.stringify(record, null, 2)}\n`);
});

it.each(["orchard-rover", "yard-crane", "survey-boat"])(
  "%s stays in its tube",
  (name) => {
    const path = resolve(here, `../../configs/${name}.yaml`);
    const read = readPlant(readFileSync(path, "utf8"), path);
    if (!read.ok) throw new Error("the plant does not read");
    const { plant } = read;
    const saved = JSON.parse(readFileSync(resolve(here, `../bench/proofArtifacts/${name}.json`), "utf8"));
    const model = fittedModel(plant, saved.residual);
    const metric = dualMetric(saved.metric);
    const question = tubeQuestion(plant, { wbar: Float64Array.from(saved.wbar), window: 1 });
    const { tube } = certifyMetric(model, saved.metric, question, SAMPLED_ALLOWANCE, seededRandom(0));
    const { n, m, p, active } = model;
    const { radius, rate, authority, spreads } = tube!;
    const room = active.map((state) => 1 - radius * Math.sqrt(spreads[state]!.value));
    const point = newModelPoint(n, m, p);
    let momentum = new Float64Array(n);
    const law = trackingLaw(model, metric);
    const watched: TrackingLaw = {
      ...law,
      step: (...args) => {
        const result = law.step(...args);
        momentum = Float64Array.from(result.path.momentumEnd);
        return result;
      },
    };

    const isInside = (z: Float64Array): boolean =>
      active.every((state, i) => Math.abs(z[state]!) <= 0.98 * Math.max(0, room[i]!));
    /** One second under a held input from z; null when it leaves the part for plans. */
    const oneSecond = (from: Float64Array, u: Float64Array): Float64Array | null => {
      const z = from.slice();
      for (let k = 0; k < 1 / STEP; k++) {
        model.evaluate(z, point);
        for (let i = 0; i < n; i++) {
          let dz = point.f[i]!;
          for (let j = 0; j < m; j++) dz += point.B[i * m + j]! * u[j]!;
          z[i]! += STEP * dz;
        }
        if (!isInside(z)) return null;
      }
      return z;
    };
    /** A plan that stays inside its part of the envelope: inputs held for a second each, drawn again where they lead out. */
    const planFrom = (random: Random) => {
      for (let attempt = 0; attempt < 2000; attempt++) {
        const start = new Float64Array(n);
        active.forEach((state, i) => {
          start[state] = 0.9 * room[i]! * (2 * random.uniform() - 1);
        });
        const held: Float64Array[] = [];
        let z: Float64Array | null = start;
        while (z !== null && held.length <= STEP * STEPS) {
          let next: Float64Array | null = null;
          for (let draw = 0; draw < 40 && next === null; draw++) {
            const u = Float64Array.from({ length: m }, () => (1 - authority) * (2 * random.uniform() - 1));
            next = oneSecond(z, u);
            if (next !== null) held.push(u);
          }
          z = next;
        }
        if (z === null) continue;
        const inputs = (time: number, u: Float64Array): void => {
          u.set(held[Math.min(held.length - 1, Math.floor(time + 1e-9))]!);
        };
        return { start, inputs, rate: () => rate };
      }
      throw new Error(`${name}: no plan of ${STEP * STEPS} s stays inside`);
    };

    const disturbanceOf = (kind: (typeof KINDS)[number], random: Random) => {
      const signs = Float64Array.from({ length: p }, () => (random.uniform() < 0.5 ? -1 : 1));
      const phases = Float64Array.from({ length: p }, () => 6 * random.uniform());
      let until = 0;
      return (time: number, z: Float64Array, w: Float64Array): void => {
        if (kind === "random" && time >= until) {
          until = time + 1;
          for (let c = 0; c < p; c++) signs[c] = random.uniform() < 0.5 ? -1 : 1;
        }
        if (kind === "adversary") {
          model.evaluate(z, point);
          for (let c = 0; c < p; c++) {
            let push = 0;
            for (let i = 0; i < n; i++) push += momentum[i]! * point.G[i * p + c]!;
            if (push !== 0) signs[c] = Math.sign(push);
          }
        }
        for (let c = 0; c < p; c++) {
          const size = kind === "sines" ? Math.sin(0.8 * time + phases[c]!) : 1;
          w[c] = signs[c]! * size * saved.wbar[c]!;
        }
      };
    };

    const worst: Record<string, number> = {};
    let [outside, notTracked] = [0, 0];
    for (let run = 0; run < RUNS; run++) {
      const random = seededRandom(SEED).stream(`${name} ${run}`);
      const kind = KINDS[run % KINDS.length]!;
      law.reset();
      momentum.fill(0);
      const plan = planFrom(random);
      const result = closedLoop(model, watched, plan, {
        start: plan.start,
        step: STEP,
        steps: STEPS,
        law: "continuous",
        disturbance: disturbanceOf(kind, random),
      });
      const most = Math.max(...result.distance);
      worst[kind] = Math.max(worst[kind] ?? 0, most / radius);
      if (most > radius) outside++;
      if (result.counts.short > 0 || result.counts.noMetric > 0) notTracked++;
    }
    figures.push({ plant: name, radius, outside, notTracked, worstShareOfRadius: worst });
    expect(outside).toBe(0);
  },
  600_000,
);
