/** Logs in: read, check, cut into runs, split by run. */
import { coverageOf } from "../../logs/coverage.js";
import { hashLogs, intakeLogs } from "../../logs/intake.js";
import { writeTable } from "../../logs/savedTable.js";
import { splitRuns } from "../../logs/splitRuns.js";
import { supportOf } from "../../logs/support.js";
import { seededRandom } from "../../num/random.js";
import { FILES, type IntakeFile } from "../artifacts.js";
import { samplesColumns } from "../samplesTable.js";
import type { Stage } from "../stage.js";

export const intakeStage: Stage = {
  name: "intake",
  title: "read and check the logs, cut and split them into runs",
  reads: [],
  makes: [FILES.plant, FILES.samples, FILES.intake],
  learns: false,
  sources: ({ plant }) => hashLogs(plant),
  run: async ({ folder, plant, plantText, seed, progress }) => {
    const intake = await intakeLogs(plant, (done, total, note) => progress("intake", done, total, note));
    const split = splitRuns(intake.runs, plant.settings.split, seededRandom(seed).stream("split"));
    const support = supportOf(plant, intake.runs);
    const { files, findings, sampleInterval, jitter } = intake;
    const saved: IntakeFile = {
      files,
      findings: findings.map(({ text }) => text),
      sampleInterval,
      jitter,
      runs: { fit: split.fit.length, calibration: split.calibration.length, test: split.test.length },
      coverage: coverageOf(plant, intake.runs),
      unsupportedShare: support.unsupportedShare,
    };
    folder.writeText(FILES.plant, plantText);
    writeTable(folder.file(FILES.samples), samplesColumns(plant, split), {});
    folder.writeJson(FILES.intake, saved);
    const rows = files.reduce((sum, file) => sum + file.rows, 0);
    const dropped = findings.length === 0 ? "" : `, ${findings.length} findings`;
    return `${intake.runs.length} runs, ${rows} samples${dropped}`;
  },
};
