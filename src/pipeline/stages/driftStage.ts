/** First of a refit: does the certificate of the parent run still cover the new runs? Exact, from the conformal scores. */
import { hashLogs, intakeLogs } from "../../logs/intake.js";
import { plantScaling } from "../../plant/scaling.js";
import { type Drift, driftOf } from "../../residual/drift.js";
import { type BoundFile, FILES, readModel } from "../artifacts.js";
import { driftWords } from "../driftWords.js";
import { RunFolderError } from "../runFolder.js";
import type { Stage } from "../stage.js";

/** Share of unchanged fleets that are called changed. */
export const DRIFT_LEVEL = 0.05;

export interface DriftFile extends Drift {
  /** In plain words, one sentence an entry. */
  readonly words: readonly string[];
}

export const driftStage: Stage = {
  name: "drift",
  title: "hold the new runs against the certificate of the parent run",
  reads: [],
  makes: [FILES.drift],
  learns: false,
  sources: ({ plant }) => hashLogs(plant),
  run: async ({ folder, plant, parent, progress }) => {
    if (parent === null)
      throw new RunFolderError(`${folder.path}: refits no earlier run, so there is no drift to test`);
    const { runs } = await intakeLogs(plant, (done, total, note) => progress("drift", done, total, note));
    const bound = parent.folder.readJson<BoundFile>(FILES.disturbance);
    const model = readModel(parent.folder, plant, "fitted");
    const drift = driftOf(model, plantScaling(plant), runs, bound.heldOut, bound, DRIFT_LEVEL);
    const words = driftWords(plant, drift, bound);
    folder.writeJson(FILES.drift, { ...drift, words } satisfies DriftFile);
    return words[0]!;
  },
};
