/**
 * The saved results that the report and other tools read. Values are in the unit that stands beside them or in the
 * plant file's unit of the state, input or channel of that name; rates in 1/s; shares between 0 and 1.
 */
import type { TradeOffPoint } from "../tube/chooseRate.js";

export interface NamedUnit {
  readonly name: string;
  readonly unit: string;
}

export type Evidence = "sampled" | "counted" | "proved";

/** summary.json: the contract with other tools; its JSON Schema is configs/summary.schema.json. */
export interface Summary {
  readonly plant: string;
  readonly description: string;
  readonly verdict: Verdict;
  readonly states: readonly NamedUnit[];
  readonly inputs: readonly NamedUnit[];
  /** The asked margin. name: its key in every certificate's margins; direction: the same in words for a reader. */
  readonly goal: NamedUnit & { readonly direction: string };
  readonly disturbance: DisturbanceSummary;
  readonly residual: { readonly channels: readonly ResidualChannel[] };
  readonly certificates: readonly CertificateSummary[];
  /** Box that the claims cover, per state and input, in its unit. */
  readonly envelope: {
    readonly states: Readonly<Record<string, readonly [number, number]>>;
    readonly inputs: Readonly<Record<string, readonly [number, number]>>;
    /** Plans must stay in this part: the envelope less the margins, the inputs less the authority; null: no margin. */
    readonly plans: {
      readonly states: Readonly<Record<string, readonly [number, number]>>;
      readonly inputs: Readonly<Record<string, readonly [number, number]>>;
    } | null;
  };
  readonly assumptions: readonly string[];
  readonly cautions: readonly string[];
  readonly unsupportedShare: number;
  readonly engine: {
    readonly name: string;
    readonly version: string;
    readonly rejected: readonly { readonly name: string; readonly reason: string }[];
  };
  readonly seed: number;
  /** Wall seconds by stage: the only numbers that differ between two runs with one seed on one engine. */
  readonly seconds: Readonly<Record<string, number>>;
}

export interface Verdict {
  /** True when the learned certificate holds as asked and gives a margin. */
  readonly holds: boolean;
  /** One or two plain sentences. */
  readonly text: string;
}

export interface DisturbanceSummary {
  readonly confidence: number;
  readonly calibrationRuns: number;
  /** s. */
  readonly window: number;
  readonly channels: readonly (NamedUnit & { readonly bound: number; readonly boundPrior: number })[];
  /** Share of the held-out test runs that stay under the bound throughout. */
  readonly testRuns: number;
  readonly testShareCovered: number;
}

export interface ResidualChannel extends NamedUnit {
  readonly rmsePrior: number;
  readonly rmseFitted: number;
}

export interface CertificateSummary {
  /** learned, constant, riccati, constant-prior, riccati-prior. */
  readonly name: string;
  /** What a reader sees, such as "learned metric, fitted model". */
  readonly title: string;
  readonly model: "fitted" | "prior";
  readonly metric: "network" | "constant";
  /**
   * holds: margin and authority are given. fails: it does not contract everywhere. authorityExceeded: it contracts, but
   * no rate keeps tracking within the authority limit. roomExceeded: its margins leave plans too little of the envelope.
   * absent: no such metric was found.
   */
  readonly status: "holds" | "fails" | "authorityExceeded" | "roomExceeded" | "absent";
  readonly reason: string;
  readonly evidence: Evidence;
  /** Rate of the tube; null without one. */
  readonly rate: number | null;
  /** Worst rate found by sampling and ascent; null when absent. */
  readonly worstRate: number | null;
  readonly provedRate: number | null;
  readonly provedShare: number;
  /** Upper limit of the volume share where any claim fails; null when not counted. */
  readonly failingShareUpper: number | null;
  readonly counted: { readonly points: number; readonly failures: number; readonly confidence: number } | null;
  /**
   * By state name; with a rotation also across, along and planar, in the unit of the position pair, whose own margins
   * equal planar. Empty without a tube.
   */
  readonly margins: Readonly<Record<string, number>>;
  /** Share of the half-range by input name. */
  readonly authority: Readonly<Record<string, number>>;
  readonly tubeRadius: number | null;
}

/** pictures.json: what the report draws beyond the summary. */
export interface Pictures {
  readonly coverage: CoveragePicture;
  readonly residual: readonly ResidualCurve[];
  readonly residualHistory: readonly { readonly step: number; readonly train: number; readonly validation: number }[];
  /** Calibration and test scores per run of the fitted model; bound = the conformal quantile. */
  readonly scores: {
    readonly calibration: readonly number[];
    readonly test: readonly number[];
    readonly bound: number;
  };
  readonly learning: readonly LearningStep[];
  readonly certificates: readonly CertificatePicture[];
}

export interface CoveragePicture {
  /** Counts of samples per state over its envelope; outside counts the samples below and above. */
  readonly states: readonly (NamedUnit & {
    readonly edges: readonly number[];
    readonly counts: readonly number[];
    readonly outside: number;
  })[];
  readonly runs: { readonly fit: number; readonly calibration: number; readonly test: number };
  readonly findings: readonly string[];
}

/** One unknown term along one of its states, the others at the middle of the envelope. */
export interface ResidualCurve {
  /** Such as "added to the rate of speed" or "gain of turn in heading". */
  readonly title: string;
  readonly unit: string;
  readonly x: NamedUnit & { readonly values: readonly number[] };
  /** Fitted term on x.values; the prior's is zero by definition. */
  readonly fitted: readonly number[];
  /** Means of the logged windows near that line, where there are any. */
  readonly logged: readonly { readonly x: number; readonly y: number }[];
}

export interface LearningStep {
  readonly round: number;
  readonly step: number;
  /** 1/s: how far the worst state of the batch is short of the rate within the authority limit; negative: it holds. */
  readonly shortfall: number;
  /** Asked margin over the batch, in its unit. */
  readonly margin: number;
  readonly rate: number;
}

export interface CertificatePicture {
  readonly name: string;
  /** Pointwise rate over the two states that it varies with most (one row when only one matters). */
  readonly rateMap: {
    readonly x: NamedUnit & { readonly values: readonly number[] };
    readonly y: (NamedUnit & { readonly values: readonly number[] }) | null;
    /** [y][x], the worst over the other coordinates. */
    readonly rate: readonly (readonly number[])[];
  } | null;
  readonly violations: readonly { readonly x: number; readonly y: number | null; readonly rate: number }[];
  /** Margin in the goal's unit. */
  readonly tradeOff: readonly TradeOffPoint[];
  readonly authorityLimit: number;
  /**
   * Largest extent along and across the heading, for the drawing of the tube around a path: body-frame position block of
   * R^2 W as [xx, xy, yy], in the position's unit squared; null without a rotation or a tube.
   */
  readonly footprint: readonly [number, number, number] | null;
}
