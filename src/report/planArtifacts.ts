/**
 * What is saved of a tube along a plan, and drawn. Values are in the unit that stands beside them or in the plant file's
 * unit of the state or input of that name; rates in 1/s; shares between 0 and 1; times in seconds as in the plan.
 */
import type { PlanProblem } from "../tube/planChecks.js";
import type { Evidence, NamedUnit } from "./artifacts.js";

/** plan-tube.json. */
export interface PlanSummary {
  readonly plant: string;
  readonly description: string;
  readonly plan: { readonly file: string; readonly samples: number; readonly from: number; readonly until: number };
  /** whole: numbers all along the plan. ends: up to a time. refused: no plan for this certificate, no numbers. */
  readonly status: "whole" | "ends" | "refused";
  /** One or two plain sentences. */
  readonly text: string;
  readonly problems: readonly PlanProblem[];
  /** Why there is no number from a time on; null: there is one to the end. */
  readonly end: { readonly time: number; readonly kind: "envelope" | "cells" | "input"; readonly text: string } | null;
  /** False: the certificate fails somewhere, so there is no fixed tube; this plan keeps to where it is proved. */
  readonly fixedHolds: boolean;
  /** Why the plan would not fit with the fixed margins; null: it would, or there are none. */
  readonly fixedMisfit: string | null;
  /** What the numbers assume that the vehicle is steered by. */
  readonly law: string;
  readonly rate: number;
  /** The fixed tube's. */
  readonly fixedRate: number;
  readonly window: number;
  readonly evidence: Evidence;
  /** Largest share of the disturbance's push that the plan's own jumps reach within a window. */
  readonly motionShare: number;
  readonly goal: string;
  readonly margins: readonly PlanMargin[];
  readonly authority: PlanValue & { readonly limit: number };
  readonly radius: PlanValue;
  /** Cells that the tube was laid over. */
  readonly cells: number;
  readonly assumptions: readonly string[];
}

/** A number of the fixed tube, null without one, beside those along the plan, null without a step that has one. */
export interface PlanValue {
  readonly fixed: number | null;
  readonly largest: number | null;
  /** Over time. */
  readonly mean: number | null;
}

export interface PlanMargin extends NamedUnit, PlanValue {}

/** What holds from one sample of the plan to the next. */
export interface PlanRow {
  readonly time: number;
  readonly until: number;
  readonly radius: number;
  readonly sigma: number;
  /** Slowest pointwise rate proved on the touched cells. */
  readonly provedRate: number;
  readonly authority: number;
  /** In the order of the summary's margins; null: heading may be further off than this margin covers. */
  readonly margins: readonly (number | null)[];
}

/** What the page draws beyond the summary. */
export interface PlanPicture {
  /** Empty when refused. */
  readonly rows: readonly PlanRow[];
  readonly fixedSigma: number | null;
  /** With a planar rotation: the planned positions in `unit`, headings in rad, one a row and one for the end. */
  readonly path: {
    readonly unit: string;
    readonly points: readonly { readonly x: number; readonly y: number; readonly heading: number }[];
  } | null;
  /** Without one: planned values of the asked state, one a row and one for the end. */
  readonly planned: readonly number[] | null;
}
