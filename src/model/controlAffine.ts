/**
 * The fitted model in scaled states z and inputs v (both in [-1, 1] over the envelope), time in seconds:
 *   zdot = f(z) + B(z) v + G(z) w,   A(z, v) = dfdx + sum_j v_j dBdx_j.
 * G keeps w in SI of its channel. f holds the effect of the inputs' centre.
 */
import type { Feature } from "../nets/features.js";
import type { Mlp } from "../nets/mlp.js";

export interface ModelPoint {
  /** n. */
  readonly f: Float64Array;
  /** n x m. */
  readonly B: Float64Array;
  /** n x p. */
  readonly G: Float64Array;
  /** n x n. */
  readonly dfdx: Float64Array;
  /** m blocks of n x n, block j the Jacobian of column j of B. */
  readonly dBdx: Float64Array;
}

export interface BodyFrame {
  readonly position: readonly [number, number];
  readonly heading: number;
  /** Half-range of the heading, rad: the rate of the heading is headingHalf * zdot_heading in rad/s. */
  readonly headingHalf: number;
}

export interface ControlAffineModel {
  readonly n: number;
  readonly m: number;
  readonly p: number;
  /** Indices of the states that anything depends on once symmetry is used: the box a certificate must cover. */
  readonly active: readonly number[];
  /** With a declared rotation: metric and rates are held in the body frame, evaluated at heading zero. */
  readonly rotation: BodyFrame | null;
  /** Model at z (n), any heading. */
  evaluate(z: Float64Array, out: ModelPoint): void;
  /** A state with the given active coordinates (active.length), cyclic ones at 0 and the heading at 0 rad. */
  embed(active: Float64Array, z: Float64Array): void;
}

export function newModelPoint(n: number, m: number, p: number): ModelPoint {
  return {
    f: new Float64Array(n),
    B: new Float64Array(n * m),
    G: new Float64Array(n * p),
    dfdx: new Float64Array(n * n),
    dBdx: new Float64Array(m * n * n),
  };
}

/** The saved residual: one small network an unknown term of the plant, in the same order. */
export interface ResidualFile {
  readonly terms: readonly ResidualTerm[];
}

/** SI value of the term = outputScale * network output (times the input in SI); the network has one output. */
export interface ResidualTerm {
  /** State whose rate it adds to. */
  readonly state: number;
  /** Input that it multiplies; null for a rate of its own. */
  readonly input: number | null;
  readonly features: readonly Feature[];
  readonly mlp: Mlp;
  readonly outputScale: number;
}
