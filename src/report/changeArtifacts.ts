/** change.json: an earlier run against its refit, in the plant's units. */
import type { CertificateSummary, Evidence, NamedUnit, ResidualCurve } from "./artifacts.js";

export interface Change {
  readonly plant: string;
  /** Path of the earlier run folder as given. */
  readonly parent: string;
  readonly logs: readonly string[];
  /** Outcome of the drift test in words, the answer first. */
  readonly drift: readonly string[];
  readonly isChanged: boolean;
  /** Null when nothing was refitted. */
  readonly refit: Refit | null;
}

export interface Refit {
  readonly planner: { readonly mustGrow: boolean; readonly text: string };
  readonly confidence: Pair<number>;
  readonly margins: readonly (NamedUnit & Pair<number | null>)[];
  readonly authority: readonly (NamedUnit & Pair<number | null>)[];
  readonly rate: Pair<number | null>;
  readonly status: Pair<CertificateSummary["status"]>;
  readonly evidence: Pair<Evidence>;
  readonly bounds: readonly (NamedUnit & Pair<number>)[];
  /** Errors on held-out new runs: of the earlier fit, and of the refit. */
  readonly residual: readonly (NamedUnit & Pair<number>)[];
  /** Fitted terms: curve of the refit, and the earlier values on its x. */
  readonly curves: readonly { readonly after: ResidualCurve; readonly before: readonly number[] }[];
  /** Shares of the envelope where the earlier metric no longer has its rate on the new model, and where the new one has none. */
  readonly regions: { readonly lost: number; readonly stillLost: number; readonly text: string };
}

export interface Pair<T> {
  readonly before: T;
  readonly after: T;
}
