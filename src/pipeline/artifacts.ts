/** Names and shapes of what the stages save, and how the later ones read it back. */
import { readSavedTable } from "../logs/savedTable.js";
import type { SplitRuns } from "../logs/splitRuns.js";
import type { ControlAffineModel, ResidualFile } from "../model/controlAffine.js";
import { fittedModel } from "../model/fittedModel.js";
import type { DualMetricFile } from "../nets/dualMetric.js";
import type { Plant } from "../plant/plant.js";
import type { TermSlopes } from "../residual/lipschitz.js";
import type { ResidualCurve } from "../residual/residualCurves.js";
import type { RunFolder } from "./runFolder.js";
import { splitFromColumns } from "./samplesTable.js";

export const FILES = {
  plant: "plant.yaml",
  drift: "drift.json",
  change: "change.json",
  changePage: "change.html",
  samples: "samples.arrow",
  intake: "intake.json",
  residual: "residual.json",
  fit: "fit.json",
  disturbance: "disturbance.json",
  leftover: "leftover.arrow",
  learned: "metric-learned.json",
  learning: "learning.json",
  certificates: "certificates.json",
  violations: "violations.arrow",
  boxes: "boxes.arrow",
  certificatePictures: "certificate-pictures.json",
  pictures: "pictures.json",
  summary: "summary.json",
  report: "report.html",
} as const;

export type ModelKind = "fitted" | "prior";

export interface IntakeFile {
  readonly files: readonly { readonly path: string; readonly rows: number; readonly runs: number }[];
  readonly findings: readonly string[];
  /** Median step and the 99th percentile of its deviation, s. */
  readonly sampleInterval: number;
  readonly jitter: number;
  readonly runs: { readonly fit: number; readonly calibration: number; readonly test: number };
  readonly coverage: readonly {
    readonly name: string;
    readonly unit: string;
    readonly edges: readonly number[];
    readonly counts: readonly number[];
    readonly outside: number;
  }[];
  readonly unsupportedShare: number;
}

export interface FitFile {
  readonly status: "improved" | "noBetterThanPrior" | "nothingUnknown";
  readonly bestStep: number;
  readonly trainingRuns: number;
  readonly validationRuns: number;
  readonly history: readonly { readonly step: number; readonly train: number; readonly validation: number }[];
  /** s: window of the errors below. */
  readonly window: number;
  /** One a state whose rate has an unknown part: error over windows of the test runs, in the plant's unit per second. */
  readonly channels: readonly {
    readonly name: string;
    readonly unit: string;
    readonly rmsePrior: number;
    readonly rmseFitted: number;
  }[];
  readonly curves: readonly ResidualCurve[];
  /** How steep each fitted term can be (residual/lipschitz.ts), in the order of the plant's unknown terms. */
  readonly slopes: readonly TermSlopes[];
}

export interface BoundFile {
  readonly confidence: number;
  readonly calibrationRuns: number;
  readonly rank: number;
  /** s. */
  readonly window: number;
  /** One entry a model: bound per leftover channel, SI. */
  readonly bounds: Readonly<Record<ModelKind, readonly number[]>>;
  readonly quantile: number;
  /** Of the fitted model: scale of each channel on the fit runs, SI, and the peaks of every held-out run, SI. */
  readonly scale: readonly number[];
  readonly heldOut: readonly {
    readonly part: "calibration" | "test";
    readonly run: string;
    readonly score: number;
    readonly peaks: readonly number[];
  }[];
  readonly calibrationScores: readonly number[];
  readonly testScores: readonly number[];
  readonly testShareCovered: number;
}

/** A metric to certify, or why there is none. */
export type MetricArtifact =
  | { readonly status: "found"; readonly metric: DualMetricFile; readonly note: string }
  | { readonly status: "absent"; readonly reason: string };

export interface CertificateKind {
  readonly name: string;
  /** What a reader sees. */
  readonly title: string;
  readonly model: ModelKind;
  readonly metric: "network" | "constant";
  /** Its MetricArtifact. */
  readonly file: string;
}

export const CERTIFICATE_KINDS: readonly CertificateKind[] = [
  { name: "learned", title: "learned metric, fitted model", model: "fitted", metric: "network", file: FILES.learned },
  ...(["fitted", "prior"] as const).flatMap((model): CertificateKind[] => {
    const [suffix, of] = model === "fitted" ? ["", "fitted model"] : ["-prior", "prior alone"];
    return [
      {
        name: `constant${suffix}`,
        title: `best constant metric, ${of}`,
        model,
        metric: "constant",
        file: `metric-constant${suffix}.json`,
      },
      {
        name: `riccati${suffix}`,
        title: `Riccati metric at trim, ${of}`,
        model,
        metric: "constant",
        file: `metric-riccati${suffix}.json`,
      },
    ];
  }),
];

export const ANALYTIC_KINDS = CERTIFICATE_KINDS.filter(({ metric }) => metric === "constant");

export function readSplit(folder: RunFolder, plant: Plant): SplitRuns {
  return splitFromColumns(plant, readSavedTable(folder.file(FILES.samples)));
}

export function readModel(folder: RunFolder, plant: Plant, kind: ModelKind): ControlAffineModel {
  return fittedModel(plant, kind === "prior" ? null : folder.readJson<ResidualFile>(FILES.residual));
}

/** Bounds of a model's leftover, SI. */
export function readBounds(folder: RunFolder, kind: ModelKind): { wbar: Float64Array; window: number } {
  const { bounds, window } = folder.readJson<BoundFile>(FILES.disturbance);
  return { wbar: Float64Array.from(bounds[kind]), window };
}
