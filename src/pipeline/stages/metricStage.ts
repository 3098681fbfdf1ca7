/**
 * The learned metric: rounds of training judged by the verifier, then the prover's word; boxes that it cannot close join
 * the training set.
 */

import { goalVector } from "../../metric/goalVector.js";
import { learnMetric } from "../../metric/learnMetric.js";
import type { ControlAffineModel, ResidualFile } from "../../model/controlAffine.js";
import { featuresOf } from "../../nets/features.js";
import { seededRandom } from "../../num/random.js";
import type { PlantSettings } from "../../plant/plant.js";
import { inputCorners } from "../../verify/corners.js";
import type { ListedClaims } from "../../verify/proof/claims.js";
import { type LeafTable, leavesOf } from "../../verify/proof/leafTable.js";
import { FILES, type MetricArtifact, readBounds, readModel } from "../artifacts.js";
import { certifyMetric, SAMPLED_ALLOWANCE, type TubeQuestion, tubeQuestion } from "../certifyMetric.js";
import { AUTHORITY_SHARE, judgeMetric, worstStates } from "../judgeMetric.js";
import { type ProofRun, proveClaims, type SavedCertificate, tubeClaims } from "../proveTube.js";
import type { Stage } from "../stage.js";

/** Analytic metrics of the fitted model to start from, the first that there is. */
const STARTS = ["metric-constant.json", "metric-riccati.json"];
const HARD_STATES = 30;
const [WARM_STEPS, WARM_ROUNDS] = [0.2, 0.3];
/** Boxes that a proof may examine while the metric is still being learned. */
const PROOF_BOXES = 40_000;
/** 1/s: where training starts when no analytic metric gives a rate. */
const FIRST_RATE = 0.3;

export const metricStage: Stage = {
  name: "metric",
  title: "learn the metric",
  reads: [FILES.residual, FILES.disturbance, ...STARTS],
  makes: [FILES.learned, FILES.learning],
  learns: true,
  run: async ({ folder, plant, seed, engine, progress, signal, workers, parent }) => {
    const model = readModel(folder, plant, "fitted");
    const question = tubeQuestion(plant, readBounds(folder, "fitted"));
    const earlier = parent === null ? [] : [parent.folder.readJson<MetricArtifact>(FILES.learned)];
    const start = [...earlier, ...STARTS.map((file) => folder.readJson<MetricArtifact>(file))].find(
      ({ status }) => status === "found",
    );
    if (start === undefined || start.status !== "found") {
      const reason = "no analytic metric was found to start from";
      folder.writeJson(FILES.learned, { status: "absent", reason } satisfies MetricArtifact);
      folder.writeJson(FILES.learning, []);
      return reason;
    }
    const residual = folder.readJson<ResidualFile>(FILES.residual);
    const { metricNet } = plant.settings;
    const report = (done: number, total: number, note: string): void => progress("metric", done, total, note);
    const first = judgeMetric(model, start.metric, question);
    const learned = await learnMetric(
      model,
      inputCorners(model.m),
      {
        ...question,
        authorityLimit: AUTHORITY_SHARE * question.authorityLimit,
        activeStates: model.active,
        goalVector: goalVector(question.goal, model.n, model.rotation),
        features: featuresOf(plant, plant.settings.metricDependsOn),
        ...(parent === null ? metricNet : warm(metricNet)),
        initialRate: first.rate ?? (first.worstRate > 0 ? first.worstRate : FIRST_RATE),
        start: start.metric,
      },
      {
        engine: await engine(),
        random: seededRandom(seed).stream("metric"),
        judge: (metric, rate) => {
          const judged = judgeMetric(model, metric, question);
          return { margin: judged.margin, worstStates: worstStates(judged, rate, question, HARD_STATES) };
        },
        openStates: (metric) =>
          openStates(model, { plant, residual, metric }, question, { workers, progress: () => undefined, signal }),
        progress: report,
        signal,
      },
    );
    folder.writeJson(FILES.learned, {
      status: "found",
      metric: learned.metric,
      note: `round ${learned.bestRound} of ${learned.rounds} judged best`,
    } satisfies MetricArtifact);
    folder.writeJson(FILES.learning, learned.history);
    return `best of ${learned.rounds} rounds: ${learned.bestRound}`;
  },
};

/** From a metric of an earlier run a share of the steps is enough. */
function warm({ width, steps, rounds }: PlantSettings["metricNet"]): PlantSettings["metricNet"] {
  return { width, steps: Math.ceil(WARM_STEPS * steps), rounds: Math.ceil(WARM_ROUNDS * rounds) };
}

/** States of the boxes that stop the proof of a metric's tube; null when it closes, empty when there is no tube. */
async function openStates(
  model: ControlAffineModel,
  subject: SavedCertificate,
  question: TubeQuestion,
  run: ProofRun,
): Promise<readonly Float64Array[] | null> {
  const { tube } = certifyMetric(model, subject.metric, question, SAMPLED_ALLOWANCE, seededRandom(0));
  if (tube === null) return [];
  const claims = tubeClaims(tube, Array.from(question.wbar));
  const proof = await proveClaims(subject, claims, run, PROOF_BOXES);
  if (proof.status === "proved") return null;
  return [...proof.refuted.map(({ at }) => at), ...openCentres(proof.leaves, claims)].slice(0, 2 * HARD_STATES);
}

function openCentres(table: LeafTable, claims: ListedClaims): Float64Array[] {
  return leavesOf(table, claims)
    .filter(({ status }) => status === "open")
    .map(({ lower, upper }) => lower.map((low, i) => (low + upper[i]!) / 2));
}
