/** Every metric's certificate with all its evidence: learned and analytic, on one meaning of the disturbance. */

import { writeTable } from "../../logs/savedTable.js";
import { supportOf } from "../../logs/support.js";
import type { ControlAffineModel, ResidualFile } from "../../model/controlAffine.js";
import { plantScaling } from "../../plant/scaling.js";
import type { CertificatePicture } from "../../report/artifacts.js";
import { inputCorners } from "../../verify/corners.js";
import type { LeafTable } from "../../verify/proof/leafTable.js";
import {
  CERTIFICATE_KINDS,
  FILES,
  type MetricArtifact,
  type ModelKind,
  readBounds,
  readModel,
  readSplit,
} from "../artifacts.js";
import { boxesColumns } from "../boxesTable.js";
import { type Certificate, type CertificateFile, certificateFile, certify } from "../certificate.js";
import { certificatePicture } from "../certificatePicture.js";
import { tubeQuestion } from "../certifyMetric.js";
import type { Stage, StageContext } from "../stage.js";

export const certifyStage: Stage = {
  name: "certify",
  title: "sampled, counted and proved evidence for every metric",
  reads: [FILES.samples, FILES.residual, FILES.disturbance, ...CERTIFICATE_KINDS.map(({ file }) => file)],
  makes: [FILES.certificates, FILES.violations, FILES.boxes, FILES.certificatePictures],
  learns: false,
  run: async (context) => {
    const { folder, plant, seed, progress, signal, workers, parent } = context;
    // what the prior alone can do has been seen in the earlier run
    const kinds = CERTIFICATE_KINDS.filter(({ model }) => parent === null || model === "fitted");
    const files: CertificateFile[] = [];
    const pictures: CertificatePicture[] = [];
    const violations: Violation[] = [];
    let boxes: LeafTable | null = null;
    for (const [done, kind] of kinds.entries()) {
      signal.throwIfAborted();
      const report = (share: number, note: string): void =>
        progress("certify", done + share, kinds.length, `${kind.title}: ${note}`);
      report(0, "sampled and counted");
      await new Promise((resolve) => setImmediate(resolve));
      const made = folder.readJson<MetricArtifact>(kind.file);
      if (made.status === "absent") {
        files.push(certificateFile(kind.name, made.reason, null));
        continue;
      }
      const model = readModel(folder, plant, kind.model);
      const residual = kind.model === "fitted" ? folder.readJson<ResidualFile>(FILES.residual) : null;
      const question = tubeQuestion(plant, readBounds(folder, kind.model));
      const certificate = await certify(model, { plant, residual, metric: made.metric }, question, seed, {
        workers,
        signal,
        progress: (share, total, note) => report(share / total, note),
      });
      files.push(certificateFile(kind.name, made.note, certificate));
      pictures.push(certificatePicture(kind.name, plant, model, certificate));
      violations.push(...violationsOf(kind.name, kind.model, certificate));
      if (kind.name === "learned") boxes = certificate.proof?.leaves ?? null;
    }
    folder.writeJson(FILES.certificates, files);
    folder.writeJson(FILES.certificatePictures, pictures);
    writeViolations(context, violations);
    if (boxes !== null) writeTable(folder.file(FILES.boxes), boxesColumns(plant, boxes), {});
    const proofs = files.map(({ name, evidence }) => `${name} ${evidence?.proof?.status ?? "no tube"}`);
    return proofs.join(", ");
  },
};

interface Violation {
  readonly certificate: string;
  readonly model: ModelKind;
  readonly at: Float64Array;
  readonly rate: number;
  readonly corner: number;
}

const MOST_VIOLATIONS = 500;

/** States where a metric does not contract at all, or at the rate that its tube claims. */
function violationsOf(name: string, model: ModelKind, { certification, proof }: Certificate): Violation[] {
  const { survey, tube } = certification;
  const claimed = tube?.claimedRate ?? 0;
  const refuted = (proof?.refuted ?? []).map(({ at }) => {
    survey.condition.moveTo(at);
    return { at, ...survey.condition.rate() };
  });
  return [...survey.violations(claimed, MOST_VIOLATIONS), ...refuted].map(({ at, rate, corner }) => ({
    certificate: name,
    model,
    at,
    rate,
    corner,
  }));
}

/** Table violations.arrow: state, input corner, rate, distance to the nearest logged state. */
function writeViolations({ folder, plant }: StageContext, rows: readonly Violation[]): void {
  const models = { fitted: readModel(folder, plant, "fitted"), prior: readModel(folder, plant, "prior") };
  const { fit, calibration, test } = readSplit(folder, plant);
  const support = supportOf(plant, [...fit, ...calibration, ...test]);
  const { stateCenter, stateHalf, inputCenter, inputHalf } = plantScaling(plant);
  const corners = inputCorners(plant.inputs.length);
  const states = rows.map(({ at, model }) => embedded(models[model], at));
  writeTable(
    folder.file(FILES.violations),
    [
      { name: "certificate", unit: "", values: rows.map(({ certificate }) => certificate) },
      ...plant.states.map(({ name, unit }, i) => ({
        name,
        unit: unit.name,
        values: Float64Array.from(states, (z) => (stateCenter[i]! + stateHalf[i]! * z[i]!) / unit.factor),
      })),
      ...plant.inputs.map(({ name, unit }, j) => ({
        name,
        unit: unit.name,
        values: Float64Array.from(
          rows,
          ({ corner }) => (inputCenter[j]! + inputHalf[j]! * (corners[corner]?.[j] ?? 0)) / unit.factor,
        ),
      })),
      { name: "rate", unit: "1/s", values: Float64Array.from(rows, ({ rate }) => rate) },
      {
        name: "supportDistance",
        unit: "half-ranges to the nearest logged state; supported up to the radius in the table's facts",
        values: Float64Array.from(states, (z) => support.distance(z)),
      },
    ],
    { supportRadius: String(support.radius) },
  );
}

function embedded(model: ControlAffineModel, at: Float64Array): Float64Array {
  const z = new Float64Array(model.n);
  model.embed(at, z);
  return z;
}
