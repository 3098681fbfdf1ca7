/** The missing dynamics: fit on the fit runs, errors on the test runs, or on the calibration runs where there are none. */
import type { ResidualFile } from "../../model/controlAffine.js";
import { fittedModel } from "../../model/fittedModel.js";
import { seededRandom } from "../../num/random.js";
import { perSecond } from "../../plant/perSecond.js";
import { plantScaling } from "../../plant/scaling.js";
import { fitResidual } from "../../residual/fitResidual.js";
import { termSlopes } from "../../residual/lipschitz.js";
import { residualCurves } from "../../residual/residualCurves.js";
import { windowedError } from "../../residual/windowedError.js";
import { FILES, type FitFile, readSplit } from "../artifacts.js";
import type { Stage } from "../stage.js";

/** s: the window of the reported errors; half a second, as in the fit. */
const ERROR_WINDOW = 0.5;

export const residualStage: Stage = {
  name: "residual",
  title: "fit the missing dynamics",
  reads: [FILES.samples],
  makes: [FILES.residual, FILES.fit],
  learns: true,
  run: async ({ folder, plant, seed, engine, progress, signal, parent }) => {
    const split = readSplit(folder, plant);
    const services = {
      engine: await engine(),
      random: seededRandom(seed).stream("residual"),
      progress: (done: number, total: number, note: string) => progress("residual", done, total, note),
      signal,
    };
    const earlier = parent?.folder.readJson<ResidualFile>(FILES.residual) ?? null;
    const fitted = await fitResidual(plant, split.fit, services, earlier);
    const heldOut = split.test.length > 0 ? split.test : split.calibration;
    const scaling = plantScaling(plant);
    const errors = [null, fitted.residual].map((residual) =>
      windowedError(fittedModel(plant, residual), scaling, heldOut, ERROR_WINDOW),
    );
    const unknown = [...new Set(plant.unknowns.map((term) => term.state))].sort((a, b) => a - b);
    const saved: FitFile = {
      status: fitted.status,
      bestStep: fitted.bestStep,
      trainingRuns: fitted.trainingRuns,
      validationRuns: fitted.validationRuns,
      history: fitted.history,
      window: ERROR_WINDOW,
      channels: unknown.map((state) => {
        const { name, unit } = plant.states[state]!;
        const [rmsePrior, rmseFitted] = errors.map((error) => error.rates[state]! / unit.factor) as [number, number];
        return { name, unit: perSecond(unit.name), rmsePrior, rmseFitted };
      }),
      curves: residualCurves(plant, fitted.residual, split.fit),
      slopes: fitted.residual.terms.map(termSlopes),
    };
    folder.writeJson(FILES.residual, fitted.residual);
    folder.writeJson(FILES.fit, saved);
    const shares = saved.channels.map(
      ({ name, rmsePrior, rmseFitted }) => `${name} ${((100 * rmseFitted) / rmsePrior).toPrecision(2)} %`,
    );
    return shares.length === 0 ? "nothing is declared unknown" : `error left of the prior's: ${shares.join(", ")}`;
  },
};
