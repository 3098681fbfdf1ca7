/** The disturbance bound: what the models leave unexplained, by windows, calibrated over runs. */
import { LogError } from "../../logs/logError.js";
import { writeTable } from "../../logs/savedTable.js";
import { plantScaling } from "../../plant/scaling.js";
import { chooseWindow } from "../../residual/chooseWindow.js";
import { type DisturbanceBound, disturbanceBound } from "../../residual/disturbanceBound.js";
import { type BoundFile, FILES, type ModelKind, readModel, readSplit } from "../artifacts.js";
import type { Stage, StageContext } from "../stage.js";

export const boundStage: Stage = {
  name: "bound",
  title: "bound what stays unexplained, by windows over whole runs",
  reads: [FILES.samples, FILES.residual],
  makes: [FILES.disturbance, FILES.leftover],
  learns: false,
  run: async (context) => {
    const { folder, plant, progress } = context;
    const split = readSplit(folder, plant);
    const scaling = plantScaling(plant);
    const { confidence } = plant.settings;
    const fittedModel = readModel(folder, plant, "fitted");
    progress("bound", 0, 3, "window");
    const window = plant.settings.window ?? chooseWindow(fittedModel, scaling, split.fit);
    const boundOf = (kind: ModelKind): DisturbanceBound => {
      const result = disturbanceBound(readModel(folder, plant, kind), scaling, split, window, confidence);
      return result.status === "bounded" ? result : tooFew(context, result.calibrationRuns, result.runsNeeded);
    };
    progress("bound", 1, 3, "fitted model");
    const fitted = boundOf("fitted");
    progress("bound", 2, 3, "prior alone");
    const prior = boundOf("prior");
    const saved: BoundFile = {
      confidence,
      calibrationRuns: fitted.calibrationRuns,
      rank: fitted.rank,
      window,
      bounds: { fitted: fitted.bound, prior: prior.bound },
      quantile: fitted.quantile,
      scale: fitted.scale,
      heldOut: (["calibration", "test"] as const).flatMap((part) =>
        fitted.scores[part].map(({ run, score, peaks }) => ({ part, run, score, peaks })),
      ),
      calibrationScores: fitted.scores.calibration.map(({ score }) => score),
      testScores: fitted.scores.test.map(({ score }) => score),
      testShareCovered: fitted.testShareCovered,
    };
    folder.writeJson(FILES.disturbance, saved);
    writeScores(context, { fitted, prior });
    const bounds = plant.leftover.map(
      ({ name, unit }, c) => `${name} ${(fitted.bound[c]! / unit.factor).toPrecision(2)} ${unit.name}`,
    );
    return `windows of ${window} s: ${bounds.join(", ")}`;
  },
};

function writeScores({ folder, plant }: StageContext, bounds: Readonly<Record<ModelKind, DisturbanceBound>>): void {
  const rows = (["fitted", "prior"] as const).flatMap((model) =>
    (["calibration", "test"] as const).flatMap((part) =>
      bounds[model].scores[part].map((entry) => ({ model, part, ...entry })),
    ),
  );
  const facts = { quantileFitted: String(bounds.fitted.quantile), quantilePrior: String(bounds.prior.quantile) };
  writeTable(
    folder.file(FILES.leftover),
    [
      { name: "model", unit: "", values: rows.map((row) => row.model) },
      { name: "part", unit: "", values: rows.map((row) => row.part) },
      { name: "run", unit: "", values: rows.map((row) => row.run) },
      { name: "score", unit: "1", values: Float64Array.from(rows, (row) => row.score) },
      { name: "worstChannel", unit: "", values: rows.map((row) => plant.leftover[row.channel]!.name) },
    ],
    facts,
  );
}

function tooFew({ plant }: StageContext, given: number, needed: number): never {
  const { confidence, split } = plant.settings;
  throw new LogError(
    plant.logs.files.join(", "),
    null,
    `${given} calibration runs give no finite bound at ${100 * confidence} % confidence; ${needed} are needed: record ` +
      `about ${Math.ceil(needed / split.calibration)} runs in all, or lower disturbance.confidence in the plant file`,
  );
}
