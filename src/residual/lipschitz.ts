/**
 * How steep a fitted term can be: an upper bound of its Lipschitz constant by the product of the layers' spectral norms
 * (Szegedy et al., "Intriguing properties of neural networks", ICLR 2014, section 4.3), tanh having slope at most 1:
 *   t(z) = s y(phi(z)),   |dt/dz| <= |s| prod_l |V_l|_2 sup |dphi/dz|_2
 * phi are the features: slope 1 for a value; half-range h of the state for the pair sin, cos of an angle, whose slopes
 * h cos and -h sin have length h together. Features of different states are orthogonal columns of dphi/dz, so its norm
 * is the largest of the states'. Holds over all states, the envelope included; exact for one linear layer on values.
 * Float64 rounded to nearest: a bound to look at, not a proof.
 */
import { Matrix, SingularValueDecomposition } from "ml-matrix";
import type { ResidualTerm } from "../model/controlAffine.js";
import type { Feature } from "../nets/features.js";
import type { Layer } from "../nets/mlp.js";

export interface TermSlopes {
  /** |t(z) - t(z')| <= scaled |z - z'|_2: t in SI (times the input's SI for a gain), z the scaled states. */
  readonly scaled: number;
  /** For each state that the term sees, on its own: the steepest change with it. */
  readonly states: readonly {
    readonly state: number;
    /** SI of t per unit of the scaled state. */
    readonly scaled: number;
    /** SI of t per SI of the state. */
    readonly si: number;
  }[];
}

export function termSlopes({ features, mlp, outputScale }: ResidualTerm): TermSlopes {
  const [first, ...rest] = mlp.layers as [Layer, ...Layer[]];
  const beyond = rest.reduce((product, { weights }) => product * spectralNorm(weights), Math.abs(outputScale));
  const states = [...new Set(features.map(({ state }) => state))].map((state) => {
    const own = features.flatMap((feature, f) => (feature.state === state ? [f] : []));
    const columns = first.weights.map((row) => own.map((f) => row[f]!));
    const scaled = beyond * spectralNorm(columns) * featureSteepness(own.map((f) => features[f]!));
    return { state, scaled, si: scaled / features[own[0]!]!.half };
  });
  const steepest = Math.max(
    ...states.map(({ state }) => featureSteepness(features.filter((feature) => feature.state === state))),
  );
  return { scaled: beyond * spectralNorm(first.weights) * steepest, states };
}

/** Largest length of the slopes of one state's features, taken together. */
function featureSteepness(features: readonly Feature[]): number {
  const values = features.filter(({ map }) => map === "value").length;
  const angle = features.find(({ map }) => map !== "value");
  return Math.sqrt(values + (angle === undefined ? 0 : angle.half ** 2));
}

/** Largest singular value of a matrix given by its rows. */
function spectralNorm(rows: readonly (readonly number[])[]): number {
  const matrix = new Matrix(rows.map((row) => [...row]));
  return new SingularValueDecomposition(matrix, {
    computeLeftSingularVectors: false,
    computeRightSingularVectors: false,
    autoTranspose: true,
  }).norm2;
}
