/**
 * Pointwise rates of many states by the SIMD kernel: the model's numbers at each state, filled in and run in batches. With
 * a declared rotation everything is at heading zero and the spin enters A: F = (A - psidot S) W + W (A - psidot S)^T - ...
 */
import { type ControlAffineModel, newModelPoint } from "../../model/controlAffine.js";
import type { DualMetricFile } from "../../nets/dualMetric.js";
import { featureSlope, featureValue } from "../../nets/features.js";
import { rangeAndNull } from "../../num/dense.js";
import { inputCorners } from "../corners.js";
import { rateKernel } from "./rateKernel.js";

/** points: count x d active coordinates, flat -> count rates, 1/s; -Infinity where the metric is not positive definite. */
export type BatchRates = (points: Float64Array) => Float64Array;

const BATCH = 512;

/** Null where the kernel does not apply: a constant metric, or a plant whose every state is actuated. */
export function batchRates(model: ControlAffineModel, file: DualMetricFile): BatchRates | null {
  const { n, m, p, active, rotation } = model;
  if (file.kind === "constant" || n <= m || active.length === 0) return null;
  const corners = inputCorners(m);
  const kernel = rateKernel({ n, m, w0: file.w0, mlp: file.mlp, corners }, BATCH);
  const point = newModelPoint(n, m, p);
  const z = new Float64Array(n);
  const { features } = file;
  const s = new Float64Array(features.length);
  const tangents = new Float64Array((m + 1) * features.length);
  const A = new Float64Array(corners.length * n * n);
  const P = new Float64Array(n * (n - m));
  const Q = new Float64Array(n * m);
  const work = new Float64Array(n * n + n * m + n);

  const along = (direction: number, i: number): number =>
    direction === 0 ? point.f[i]! : point.B[i * m + direction - 1]!;
  const fillJacobians = (): void => {
    corners.forEach((corner, c) => {
      const K = A.subarray(c * n * n, (c + 1) * n * n);
      K.set(point.dfdx);
      for (let j = 0; j < m; j++) for (let e = 0; e < n * n; e++) K[e]! += corner[j]! * point.dBdx[j * n * n + e]!;
      if (rotation === null) return;
      const { heading, headingHalf, position } = rotation;
      let psidot = along(0, heading);
      for (let j = 0; j < m; j++) psidot += corner[j]! * along(j + 1, heading);
      const [a, b] = position;
      K[b * n + a]! -= headingHalf * psidot;
      K[a * n + b]! += headingHalf * psidot;
    });
  };
  const setState = (at: number, coordinates: Float64Array): void => {
    model.embed(coordinates, z);
    model.evaluate(z, point);
    features.forEach((feature, f) => {
      s[f] = featureValue(feature, z[feature.state]!);
      const slope = featureSlope(feature, z[feature.state]!);
      for (let d = 0; d <= m; d++) tangents[d * features.length + f] = slope * along(d, feature.state);
    });
    fillJacobians();
    rangeAndNull(point.B, Q, P, n, m, work);
    kernel.set(at, s, tangents, A, P);
  };

  return (points) => {
    const d = active.length;
    const count = points.length / d;
    const rates = new Float64Array(count);
    for (let from = 0; from < count; from += BATCH) {
      const size = Math.min(BATCH, count - from);
      for (let i = 0; i < size; i++) setState(i, points.subarray((from + i) * d, (from + i + 1) * d));
      rates.set(kernel.run(size), from);
    }
    return rates.map((rate) => (Number.isNaN(rate) ? Number.NEGATIVE_INFINITY : rate));
  };
}
