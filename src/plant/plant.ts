/**
 * The plant: what is known before any log is read. All values are SI and radians; `Unit` converts for people.
 * Built and validated by readPlant.ts; every other module relies on it being consistent.
 *
 *   xdot_i = f_i(x) + sum_j B_ij(x) u_j + sum_k G_ik(x) w_k        (prior rates, without the residual)
 */
import type { Expression } from "./expression.js";

/** A unit as people write it: value in SI = factor * value in this unit. */
export interface Unit {
  readonly name: string;
  readonly factor: number;
}

export interface StateSpec {
  readonly name: string;
  readonly unit: Unit;
  /** Envelope, SI. */
  readonly min: number;
  readonly max: number;
  /** True for units of plane angle: networks see its sine and cosine. */
  readonly isAngle: boolean;
}

export interface InputSpec {
  readonly name: string;
  readonly unit: Unit;
  readonly min: number;
  readonly max: number;
}

/** One unknown function of the states, added to the rate of `state`: alone (input null) or times that input. */
export interface UnknownTerm {
  readonly state: number;
  readonly input: number | null;
  /** Indices of the states that it may depend on; at least one. */
  readonly dependsOn: readonly number[];
}

export interface LeftoverChannel {
  readonly name: string;
  readonly unit: Unit;
}

export interface Symmetry {
  /** States along which a shift changes nothing. Includes the position pair when a rotation is declared. */
  readonly translation: readonly number[];
  /** Planar rotation: a position pair in a world frame, and the heading (positive counter-clockwise, ISO 8855). */
  readonly rotation: { readonly position: readonly [number, number]; readonly heading: number } | null;
}

/** What the asked margin is: one state, or with a declared rotation a direction of the position pair. */
export type MarginGoal =
  | { readonly kind: "state"; readonly state: number }
  | { readonly kind: "across" | "along" | "planar" };

export interface LogSource {
  /** Absolute paths of the bundled log files (CSV, Arrow IPC file or stream). */
  readonly files: readonly string[];
  readonly time: { readonly column: string; readonly unit: Unit };
  /** Column whose value names the run; null when each file is one run. */
  readonly run: string | null;
  /** One entry a state and one an input, in plant order. */
  readonly states: readonly { readonly column: string; readonly unit: Unit }[];
  readonly inputs: readonly { readonly column: string; readonly unit: Unit }[];
  /** A step longer than this (s) starts a new piece of the run. */
  readonly maxGap: number;
}

export interface PlantSettings {
  /** 1 - alpha of the disturbance bound. */
  readonly confidence: number;
  /** Shares of the runs: fit, calibration, test; sum 1. */
  readonly split: { readonly fit: number; readonly calibration: number; readonly test: number };
  /** Leftover window (s); null: chosen on the fit runs. */
  readonly window: number | null;
  /** What to do where the logs hold no states. */
  readonly unsupported: "refuse" | "accept";
  readonly goal: MarginGoal;
  /** Share of each input's half-range that tracking may use. */
  readonly authorityLimit: number;
  /** Share of each active state's half-range that its margin may take from plans. */
  readonly roomLimit: number;
  /** Tube radius at the start, as a distance in the metric; 0 by default. */
  readonly initialDistance: number;
  /** Contraction rate (1/s); null: chosen by the tool. */
  readonly rate: number | null;
  /** States that the metric may depend on; never a cyclic one nor the heading. */
  readonly metricDependsOn: readonly number[];
  readonly residualNet: { readonly width: number; readonly steps: number };
  readonly metricNet: { readonly width: number; readonly steps: number; readonly rounds: number };
  readonly seed: number;
}

/** The split, parsed expressions: f = value at u = 0, B the coefficients of u. Indices as in the states and inputs. */
export interface RateExpressions {
  readonly f: readonly Expression[];
  /** [state][input]. */
  readonly B: readonly (readonly Expression[])[];
  /** [state][leftover channel]. */
  readonly G: readonly (readonly Expression[])[];
}

/** Prior rates at one state, SI, row-major; written into the caller's arrays. */
export interface RatesPoint {
  /** f: n. */
  readonly f: Float64Array;
  /** B: n x m. */
  readonly B: Float64Array;
  /** G: n x p. */
  readonly G: Float64Array;
  /** df/dx: n x n. */
  readonly dfdx: Float64Array;
  /** dB/dx: m blocks of n x n; block j is the Jacobian of column j of B. */
  readonly dBdx: Float64Array;
}

export interface CompiledRates {
  /** x: n (SI). Throws nothing; a singular expression gives a non-finite number. */
  evaluate(x: Float64Array, out: RatesPoint): void;
}

export interface Plant {
  readonly name: string;
  readonly description: string;
  readonly states: readonly StateSpec[];
  readonly inputs: readonly InputSpec[];
  readonly leftover: readonly LeftoverChannel[];
  readonly unknowns: readonly UnknownTerm[];
  readonly symmetry: Symmetry;
  readonly logs: LogSource;
  readonly settings: PlantSettings;
  readonly expressions: RateExpressions;
  readonly rates: CompiledRates;
}

export function newRatesPoint(n: number, m: number, p: number): RatesPoint {
  return {
    f: new Float64Array(n),
    B: new Float64Array(n * m),
    G: new Float64Array(n * p),
    dfdx: new Float64Array(n * n),
    dBdx: new Float64Array(m * n * n),
  };
}
