/** Temporary: designs at the middle of the envelope. */
import { type ControlAffineModel, newModelPoint } from "../model/controlAffine.js";
import { frameJacobian } from "./conditionSample.js";
import { identity } from "./metricBlocks.js";
import { riccatiMetric } from "./riccatiMetric.js";

export function riccatiAtTrim(model: ControlAffineModel, _corners: readonly Float64Array[], _wbar: Float64Array) {
  const { n, m, p } = model;
  const z = new Float64Array(n);
  const point = newModelPoint(n, m, p);
  model.embed(new Float64Array(model.active.length), z);
  model.evaluate(z, point);
  const K = frameJacobian(model, point, new Float64Array(m));
  return [0.05, 0.1, 0.2, 0.4].flatMap((shift) => {
    const r = riccatiMetric(K, point.B, shift, identity(n), identity(m));
    return r.status === "solved" ? [{ W: r.W, shift }] : [];
  });
}
