/** summary.json, pictures.json and the page, from saved artifacts alone. */
import type { LearnStep } from "../../metric/learnMetric.js";
import type { Plant } from "../../plant/plant.js";
import type { CertificatePicture, LearningStep, Pictures, Summary } from "../../report/artifacts.js";
import { renderReport } from "../../report/renderReport.js";
import { type BoundFile, CERTIFICATE_KINDS, FILES, type FitFile, type IntakeFile } from "../artifacts.js";
import type { CertificateFile } from "../certificate.js";
import { goalState, halfRange } from "../certificatePicture.js";
import type { Stage, StageContext } from "../stage.js";
import { summaryOf } from "../summaryOf.js";

export const reportStage: Stage = {
  name: "report",
  title: "summary and report",
  reads: [
    ...[FILES.intake, FILES.fit, FILES.disturbance, FILES.learning, FILES.certificates, FILES.certificatePictures],
    ...CERTIFICATE_KINDS.map(({ file }) => file),
  ],
  makes: [FILES.summary, FILES.pictures, FILES.report],
  learns: true,
  run: async (context) => {
    const { folder, progress } = context;
    const summary = await summaryNow(context);
    const pictures = picturesNow(context);
    progress("report", 0, 1, "pictures");
    folder.writeJson(FILES.summary, summary);
    folder.writeJson(FILES.pictures, pictures);
    folder.writeText(FILES.report, await renderReport(summary, pictures));
    return "";
  },
};

async function summaryNow({ folder, plant, seed, engine }: StageContext): Promise<Summary> {
  const { name, version, rejected } = await engine();
  const stages = folder.manifest()?.stages ?? {};
  return summaryOf({
    plant,
    seed,
    engine: { name, version, rejected },
    intake: folder.readJson<IntakeFile>(FILES.intake),
    fit: folder.readJson<FitFile>(FILES.fit),
    bound: folder.readJson<BoundFile>(FILES.disturbance),
    certificates: folder.readJson<CertificateFile[]>(FILES.certificates),
    seconds: Object.fromEntries(
      Object.entries(stages)
        .filter(([stage]) => stage !== "report")
        .map(([stage, { seconds }]) => [stage, seconds]),
    ),
  });
}

function picturesNow({ folder, plant }: StageContext): Pictures {
  const intake = folder.readJson<IntakeFile>(FILES.intake);
  const fit = folder.readJson<FitFile>(FILES.fit);
  const bound = folder.readJson<BoundFile>(FILES.disturbance);
  return {
    coverage: { states: intake.coverage, runs: intake.runs, findings: intake.findings },
    residual: fit.curves,
    residualHistory: fit.history,
    scores: { calibration: bound.calibrationScores, test: bound.testScores, bound: bound.quantile },
    learning: learningSteps(plant, folder.readJson<LearnStep[]>(FILES.learning)),
    certificates: folder.readJson<CertificatePicture[]>(FILES.certificatePictures),
  };
}

function learningSteps(plant: Plant, history: readonly LearnStep[]): LearningStep[] {
  const half = halfRange(plant, goalState(plant, plant.settings.goal));
  return history.map(({ round, step, shortfall, margin, rate }) => ({
    round,
    step,
    shortfall,
    margin: margin * half,
    rate,
  }));
}
