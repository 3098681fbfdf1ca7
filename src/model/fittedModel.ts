/**
 * The fitted model: the plant's prior rates plus the residual networks, in scaled states and inputs
 * (controlAffine.ts). Per scaled state i with half-range h_i and input j with half-range e_j and centre c_j:
 *   f_i = (f_i(x) + sum_j B_ij(x) c_j) / h_i,   B_ij = B_ij(x) e_j / h_i,   G_ik = G_ik(x) / h_i,
 * Jacobians by the chain rule (d/dz_k = h_k d/dx_k). The prior alone is the model with no residual.
 */
import { featureSlope, featureValue } from "../nets/features.js";
import { mlpEvaluator } from "../nets/mlp.js";
import { newRatesPoint, type Plant } from "../plant/plant.js";
import { activeStates, plantScaling } from "../plant/scaling.js";
import type { ControlAffineModel, ResidualFile, ResidualTerm } from "./controlAffine.js";

export function fittedModel(plant: Plant, residual: ResidualFile | null): ControlAffineModel {
  const n = plant.states.length;
  const m = plant.inputs.length;
  const p = plant.leftover.length;
  const { stateCenter, stateHalf, inputCenter, inputHalf } = plantScaling(plant);
  const active = activeStates(plant);
  const terms = (residual?.terms ?? []).map(termEvaluator);
  const x = new Float64Array(n);
  const prior = newRatesPoint(n, m, p);
  const { rotation } = plant.symmetry;
  const headingZero = rotation === null ? 0 : -stateCenter[rotation.heading]! / stateHalf[rotation.heading]!;

  return {
    n,
    m,
    p,
    active,
    rotation:
      rotation === null
        ? null
        : { position: rotation.position, heading: rotation.heading, headingHalf: stateHalf[rotation.heading]! },
    embed: (from, z) => {
      z.fill(0);
      for (let i = 0; i < active.length; i++) z[active[i]!] = from[i]!;
      if (rotation !== null) z[rotation.heading] = headingZero;
    },
    evaluate: (z, out) => {
      for (let i = 0; i < n; i++) x[i] = stateCenter[i]! + stateHalf[i]! * z[i]!;
      plant.rates.evaluate(x, prior);
      for (const term of terms) term.addTo(z, prior, stateHalf);
      for (let i = 0; i < n; i++) {
        const scale = 1 / stateHalf[i]!;
        let drift = prior.f[i]!;
        for (let j = 0; j < m; j++) {
          drift += prior.B[i * m + j]! * inputCenter[j]!;
          out.B[i * m + j] = prior.B[i * m + j]! * inputHalf[j]! * scale;
        }
        out.f[i] = drift * scale;
        for (let k = 0; k < p; k++) out.G[i * p + k] = prior.G[i * p + k]! * scale;
        for (let k = 0; k < n; k++) {
          const at = i * n + k;
          const chain = stateHalf[k]! * scale;
          let slope = prior.dfdx[at]!;
          for (let j = 0; j < m; j++) {
            const bSlope = prior.dBdx[j * n * n + at]!;
            slope += bSlope * inputCenter[j]!;
            out.dBdx[j * n * n + at] = bSlope * inputHalf[j]! * chain;
          }
          out.dfdx[at] = slope * chain;
        }
      }
    },
  };
}

/** Adds a residual term and its gradient to rates in SI. */
function termEvaluator(term: ResidualTerm) {
  const { state, input, features, outputScale } = term;
  const net = mlpEvaluator(term.mlp);
  const count = features.length;
  const s = new Float64Array(count);
  const identity = Float64Array.from({ length: count * count }, (_, i) => (i % (count + 1) === 0 ? 1 : 0));
  const value = new Float64Array(1);
  const gradient = new Float64Array(count);
  return {
    addTo: (z: Float64Array, rates: ReturnType<typeof newRatesPoint>, stateHalf: Float64Array): void => {
      const n = rates.f.length;
      const m = rates.B.length / n;
      for (let k = 0; k < count; k++) s[k] = featureValue(features[k]!, z[features[k]!.state]!);
      net.valueAndTangents(s, identity, count, value, gradient);
      if (input === null) rates.f[state]! += outputScale * value[0]!;
      else rates.B[state * m + input]! += outputScale * value[0]!;
      const target = input === null ? rates.dfdx : rates.dBdx;
      const from = (input === null ? 0 : input * n * n) + state * n;
      for (let k = 0; k < count; k++) {
        const feature = features[k]!;
        const slope = featureSlope(feature, z[feature.state]!) / stateHalf[feature.state]!;
        target[from + feature.state]! += outputScale * gradient[k]! * slope;
      }
    },
  };
}
