/**
 * What the learner holds of one state: constants of the frozen model, taken once. Scaled states (n) and inputs (m).
 */
import { type ControlAffineModel, type ModelPoint, newModelPoint } from "../model/controlAffine.js";
import { type Feature, featureSlope, featureValue } from "../nets/features.js";

export interface TrainingState {
  /** Network inputs (features) and their derivatives along f, b_1 .. b_m: (m+1) x features. */
  readonly features: Float64Array;
  readonly featureTangents: Float64Array;
  readonly point: ModelPoint;
  /** Body spin, rad/s, along f, b_1 .. b_m; zeros without a declared rotation. */
  readonly spin: Float64Array;
}

export function trainingState(
  model: ControlAffineModel,
  features: readonly Feature[],
  active: Float64Array,
): TrainingState {
  const { n, m, p } = model;
  const z = new Float64Array(n);
  const point = newModelPoint(n, m, p);
  model.embed(active, z);
  model.evaluate(z, point);
  const along = (direction: number, i: number): number =>
    direction === 0 ? point.f[i]! : point.B[i * m + direction - 1]!;
  const featureTangents = new Float64Array((m + 1) * features.length);
  for (let d = 0; d <= m; d++) {
    features.forEach((feature, k) => {
      featureTangents[d * features.length + k] = featureSlope(feature, z[feature.state]!) * along(d, feature.state);
    });
  }
  const { rotation } = model;
  return {
    features: Float64Array.from(features, (feature) => featureValue(feature, z[feature.state]!)),
    featureTangents,
    point,
    spin: Float64Array.from({ length: m + 1 }, (_, d) =>
      rotation === null ? 0 : rotation.headingHalf * along(d, rotation.heading),
    ),
  };
}
