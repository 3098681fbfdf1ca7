/** Last of a refit: the earlier run against the new one, as change.json and a page. */
import type { ResidualFile } from "../../model/controlAffine.js";
import { fittedModel } from "../../model/fittedModel.js";
import { dualMetric } from "../../nets/dualMetric.js";
import type { Plant } from "../../plant/plant.js";
import { plantScaling } from "../../plant/scaling.js";
import type { CertificateSummary, NamedUnit, Summary } from "../../report/artifacts.js";
import type { Change, Pair, Refit } from "../../report/changeArtifacts.js";
import { changePage } from "../../report/changePage.js";
import { quantity, share } from "../../report/format.js";
import { residualCurves } from "../../residual/residualCurves.js";
import { windowedError } from "../../residual/windowedError.js";
import { condition } from "../../verify/condition.js";
import { scanPoints } from "../../verify/scanPoints.js";
import { FILES, type FitFile, type MetricArtifact, readModel, readSplit } from "../artifacts.js";
import type { CertificateFile } from "../certificate.js";
import { type RunFolder, RunFolderError } from "../runFolder.js";
import type { Stage, StageContext } from "../stage.js";
import type { DriftFile } from "./driftStage.js";

const SCAN = 4096;

export const changeStage: Stage = {
  name: "change",
  title: "what changed against the earlier run",
  reads: [FILES.drift, FILES.summary, FILES.certificates, FILES.residual, FILES.samples, FILES.fit],
  makes: [FILES.change, FILES.changePage],
  learns: false,
  run: async (context) => {
    const change = changeOf(context, refitOf(context));
    await saveChange(context.folder, change);
    return change.refit!.planner.text;
  },
};

/** When nothing is refitted: the outcome of the drift test alone. */
export async function saveUnchanged(context: StageContext): Promise<Change> {
  const change = changeOf(context, null);
  await saveChange(context.folder, change);
  return change;
}

async function saveChange(folder: RunFolder, change: Change): Promise<void> {
  folder.writeJson(FILES.change, change);
  folder.writeText(FILES.changePage, await changePage(change));
}

function changeOf({ folder, plant, parent }: StageContext, refit: Refit | null): Change {
  const { words, isChanged } = folder.readJson<DriftFile>(FILES.drift);
  return { plant: plant.name, parent: parent!.path, logs: plant.logs.files, drift: words, isChanged, refit };
}

function refitOf({ folder, plant, parent }: StageContext): Refit {
  if (parent === null)
    throw new RunFolderError(`${folder.path}: refits no earlier run, so there is nothing to compare`);
  const summaries = pairOf(parent.folder, folder, (run) => run.readJson<Summary>(FILES.summary));
  const learned = each(summaries, ({ certificates }) => certificates.find(({ name }) => name === "learned")!);
  const { goal } = summaries.after;
  const named = (items: readonly NamedUnit[], of: (c: CertificateSummary) => Readonly<Record<string, number>>) =>
    items.map(({ name, unit }) => ({ name, unit, ...each(learned, (c) => of(c)[name] ?? null) }));
  const extra = Object.keys({ ...learned.before.margins, ...learned.after.margins })
    .filter((name) => !plant.states.some((state) => state.name === name))
    .map((name) => ({ name, unit: goal.unit }));
  const margins = named([...summaries.after.states, ...extra], ({ margins: of }) => of);
  return {
    planner: plannerOf(goal, margins, learned),
    confidence: each(summaries, ({ disturbance }) => disturbance.confidence),
    margins,
    authority: named(summaries.after.inputs, ({ authority }) => authority),
    rate: each(learned, (certificate) => certificate.rate),
    status: each(learned, ({ status }) => status),
    evidence: each(learned, ({ evidence }) => evidence),
    bounds: summaries.after.disturbance.channels.map(({ name, unit, bound }, c) => ({
      name,
      unit,
      before: summaries.before.disturbance.channels[c]!.bound,
      after: bound,
    })),
    ...residualChange(plant, parent.folder, folder),
    regions: regionsOf(plant, parent.folder, folder),
  };
}

function plannerOf(
  goal: Summary["goal"],
  margins: Refit["margins"],
  learned: Pair<CertificateSummary>,
): Refit["planner"] {
  if (learned.after.status !== "holds") {
    return {
      mustGrow: true,
      text: `The refit gives no margin: ${learned.after.reason}. The earlier margins are void.`,
    };
  }
  const asked = margins.find(({ name }) => name === goal.name)!;
  const after = quantity(asked.after!, goal.unit, "up");
  if (asked.before === null) return { mustGrow: true, text: `The margin is now ${after}; there was none before.` };
  const before = quantity(asked.before, goal.unit, "up");
  const grown = margins.filter((margin) => margin.before !== null && margin.after! > margin.before);
  const mustGrow = grown.length > 0;
  const others = grown.length === 0 ? "" : ` Larger than before: ${grown.map(({ name }) => name).join(", ")}.`;
  const verb = asked.after! > asked.before ? "grows" : "falls";
  return { mustGrow, text: `The asked margin (${goal.name}) ${verb} from ${before} to ${after}.${others}` };
}

function residualChange(plant: Plant, before: RunFolder, after: RunFolder): Pick<Refit, "residual" | "curves"> {
  const { fit, calibration, test } = readSplit(after, plant);
  const heldOut = test.length > 0 ? test : calibration;
  const { channels, window, curves } = after.readJson<FitFile>(FILES.fit);
  const earlier = before.readJson<ResidualFile>(FILES.residual);
  const errors = windowedError(fittedModel(plant, earlier), plantScaling(plant), heldOut, window).rates;
  const earlierCurves = residualCurves(plant, earlier, fit);
  return {
    residual: channels.map(({ name, unit, rmseFitted }) => {
      const state = plant.states.findIndex((other) => other.name === name);
      return { name, unit, before: errors[state]! / plant.states[state]!.unit.factor, after: rmseFitted };
    }),
    curves: curves.map((curve, i) => ({ after: curve, before: earlierCurves[i]!.fitted })),
  };
}

/** Where the metrics have the rates that they claim on the new model, by low-discrepancy states: sampled evidence. */
function regionsOf(plant: Plant, before: RunFolder, after: RunFolder): Refit["regions"] {
  const model = readModel(after, plant, "fitted");
  const points = scanPoints(model.active.length, SCAN);
  const shareBelow = (run: RunFolder): number => {
    const made = run.readJson<MetricArtifact>(FILES.learned);
    const claimed = run
      .readJson<CertificateFile[]>(FILES.certificates)
      .find(({ name }) => name === "learned")?.evidence;
    if (made.status === "absent" || claimed?.tube == null) return 1;
    const here = condition(model, dualMetric(made.metric));
    const d = model.active.length;
    const count = points.length / Math.max(1, d);
    let below = 0;
    for (let i = 0; i < count; i++) {
      if (!here.moveTo(points.subarray(i * d, (i + 1) * d)) || here.rate().rate < claimed.tube.claimedRate) below++;
    }
    return below / count;
  };
  const lost = shareBelow(before);
  const stillLost = shareBelow(after);
  return {
    lost,
    stillLost,
    text:
      `On the new model the earlier metric falls short of its claimed rate in ${share(lost, "up")} of the envelope; ` +
      `the new metric falls short of its own in ${share(stillLost, "up")} (${SCAN} spread states, sampled).`,
  };
}

function pairOf<T>(before: RunFolder, after: RunFolder, of: (run: RunFolder) => T): Pair<T> {
  return { before: of(before), after: of(after) };
}

function each<T, U>({ before, after }: Pair<T>, of: (value: T) => U): Pair<U> {
  return { before: of(before), after: of(after) };
}
