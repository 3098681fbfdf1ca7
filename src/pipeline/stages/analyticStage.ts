/**
 * The analytic metrics that the learned one is compared with, each on the prior alone and on the fitted model: a Riccati
 * metric at a trim point, and the best constant W over the envelope with cuts where the verifier finds it failing.
 */
import { type ConstantMetric, constantMetric } from "../../baseline/constantMetric.js";
import { riccatiAtTrim } from "../../baseline/riccatiAtTrim.js";
import type { ControlAffineModel } from "../../model/controlAffine.js";
import type { DualMetricFile } from "../../nets/dualMetric.js";
import { dualMetric } from "../../nets/dualMetric.js";
import type { Plant } from "../../plant/plant.js";
import { inputCorners } from "../../verify/corners.js";
import { scanPoints } from "../../verify/scanPoints.js";
import { survey } from "../../verify/survey.js";
import { ANALYTIC_KINDS, FILES, type MetricArtifact, readBounds, readModel } from "../artifacts.js";
import { tubeQuestion } from "../certifyMetric.js";
import { AUTHORITY_SHARE, judgeMetric } from "../judgeMetric.js";
import type { Stage } from "../stage.js";

/** Active states that the constant metric starts from, and how often cuts may join them. */
const [FIRST_STATES, CUT_ROUNDS, CUTS] = [16, 6, 6];
const CHECK = { points: 1024, starts: 4 };

export const analyticStage: Stage = {
  name: "analytic",
  title: "the analytic metrics to compare with",
  reads: [FILES.residual, FILES.disturbance],
  makes: ANALYTIC_KINDS.map(({ file }) => file),
  learns: false,
  run: async ({ folder, plant, progress, signal, parent }) => {
    if (parent !== null) {
      for (const { file } of ANALYTIC_KINDS) folder.writeJson(file, ofEarlierRun(parent.folder.readJson(file)));
      return "those of the earlier run, certified anew";
    }
    const notes: string[] = [];
    for (const [done, kind] of ANALYTIC_KINDS.entries()) {
      signal.throwIfAborted();
      progress("analytic", done, ANALYTIC_KINDS.length, kind.title);
      await new Promise((resolve) => setImmediate(resolve));
      const model = readModel(folder, plant, kind.model);
      const bounds = readBounds(folder, kind.model);
      const made = kind.name.startsWith("riccati")
        ? bestRiccati(plant, model, bounds)
        : bestConstant(plant, model, bounds);
      folder.writeJson(kind.file, made);
      if (made.status === "absent") notes.push(`${kind.name}: none`);
    }
    return notes.join(", ");
  },
};

/** A refit compares with the analytic metrics that its user has, certified on the new model and bound. */
function ofEarlierRun(made: MetricArtifact): MetricArtifact {
  return made.status === "found" ? { ...made, note: "of the run before the change" } : made;
}

interface Bounds {
  readonly wbar: Float64Array;
  readonly window: number;
}

function bestConstant(plant: Plant, model: ControlAffineModel, bounds: Bounds): MetricArtifact {
  const { goal, authorityLimit, roomLimit, rate } = plant.settings;
  const dimension = model.active.length;
  const points = scanPoints(dimension, FIRST_STATES);
  const states = Array.from({ length: points.length / dimension }, (_, i) =>
    points.subarray(i * dimension, (i + 1) * dimension),
  );
  const request = {
    ...bounds,
    authorityLimit: AUTHORITY_SHARE * authorityLimit,
    goalStates: goal.kind === "state" ? [goal.state] : [...plant.symmetry.rotation!.position],
    roomLimit,
    roomStates: model.active,
    rate,
    rounds: CUT_ROUNDS,
  };
  const violations = ({ W, rate: claimed }: ConstantMetric): Float64Array[] => {
    const seen = survey(model, dualMetric(constantFile(W)), CHECK);
    const found = seen.violations(claimed, CUTS).map(({ at }) => at);
    return seen.worst.rate < claimed ? [seen.worst.at, ...found] : found;
  };
  const result = constantMetric(model, inputCorners(model.m), states, request, violations);
  const made = `${result.samples} sampled states, ${result.cutRounds} rounds of cuts`;
  if (result.status === "infeasible") {
    return result.leastAuthority === null
      ? { status: "absent", reason: result.reason }
      : { status: "found", metric: constantFile(result.leastAuthority.W), note: result.reason };
  }
  const gap = result.gap === null ? "" : `, margin within ${(100 * result.gap).toPrecision(2)} % of the least on these`;
  return { status: "found", metric: constantFile(result.W), note: `${made}${gap}` };
}

function bestRiccati(plant: Plant, model: ControlAffineModel, bounds: Bounds): MetricArtifact {
  const designs = riccatiAtTrim(model);
  if (designs.length === 0) {
    return { status: "absent", reason: "the Riccati equation has no stabilising solution at the trim point" };
  }
  const judged = designs.map((design) => {
    const metric = constantFile(design.W);
    return { metric, design, ...judgeMetric(model, metric, tubeQuestion(plant, bounds)) };
  });
  const best = judged.reduce((a, b) => {
    if (a.margin !== null || b.margin !== null) {
      return (b.margin ?? Number.POSITIVE_INFINITY) < (a.margin ?? Number.POSITIVE_INFINITY) ? b : a;
    }
    return b.worstRate > a.worstRate ? b : a;
  });
  return {
    status: "found",
    metric: best.metric,
    note: `prescribed stability ${best.design.shift.toPrecision(3)} 1/s, the best of ${judged.length} designs`,
  };
}

function constantFile(W: Float64Array): DualMetricFile {
  return { kind: "constant", n: Math.sqrt(W.length), W: Array.from(W) };
}
