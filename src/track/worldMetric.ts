/**
 * The dual metric in world coordinates of the scaled states, and the states that it varies with. Without a declared rotation
 * that is W itself. With one, W is held in the body frame and W_world = T(psi) What T(psi)^T, T turning the position pair by
 * the heading psi = headingHalf (z_heading - z_heading at 0 rad), so that
 *   d W_world / dz_heading = headingHalf (S W_world + W_world S^T),   S = [[0, -1], [1, 0]] on the position pair:
 * a constant What varies with the heading. All other states are cyclic: W does not depend on them.
 */
import type { ControlAffineModel } from "../model/controlAffine.js";
import type { DualMetric } from "../nets/dualMetric.js";

export interface WorldMetric {
  readonly n: number;
  /** States that W depends on, ascending. */
  readonly varying: readonly number[];
  /** All others. */
  readonly cyclic: readonly number[];
  /** W (n x n) at z, and dW (varying.length x n x n), its derivatives in the varying states in their order. */
  evaluate(z: Float64Array, W: Float64Array, dW: Float64Array): void;
}

/** Owns its work space. Throws when model and metric differ in their number of states. */
export function worldMetric(model: ControlAffineModel, metric: DualMetric): WorldMetric {
  const { n, rotation } = model;
  if (metric.n !== n)
    throw new Error(`the metric has ${metric.n} states and the model ${n}; give a metric of that model`);
  const inBody = [...metric.dependsOn].sort((a, b) => a - b);
  const varying = [...new Set(rotation === null ? inBody : [...inBody, rotation.heading])].sort((a, b) => a - b);
  const cyclic = Array.from({ length: n }, (_, i) => i).filter((i) => !varying.includes(i));
  const count = varying.length;
  const directions = new Float64Array(count * n);
  varying.forEach((state, c) => {
    directions[c * n + state] = 1;
  });
  if (rotation === null) {
    return {
      n,
      varying,
      cyclic,
      evaluate: (z, W, dW) => metric.evaluate(z, directions, count, W, dW),
    };
  }

  const { heading, headingHalf, position } = rotation;
  const [a, b] = position;
  const atZero = new Float64Array(n);
  model.embed(new Float64Array(model.active.length), atZero);
  const headingZero = atZero[heading]!;
  const headingAt = varying.indexOf(heading);

  const turn = (z: Float64Array, W: Float64Array, from: number): void => {
    const psi = headingHalf * (z[heading]! - headingZero);
    const cos = Math.cos(psi);
    const sin = Math.sin(psi);
    for (let j = 0; j < n; j++) {
      const wa = W[from + a * n + j]!;
      const wb = W[from + b * n + j]!;
      W[from + a * n + j] = cos * wa - sin * wb;
      W[from + b * n + j] = sin * wa + cos * wb;
    }
    for (let j = 0; j < n; j++) {
      const wa = W[from + j * n + a]!;
      const wb = W[from + j * n + b]!;
      W[from + j * n + a] = cos * wa - sin * wb;
      W[from + j * n + b] = sin * wa + cos * wb;
    }
  };
  /** out = headingHalf (S W + W S^T). */
  const spin = (W: Float64Array, out: Float64Array, to: number): void => {
    out.fill(0, to, to + n * n);
    for (let j = 0; j < n; j++) {
      out[to + a * n + j]! -= headingHalf * W[b * n + j]!;
      out[to + j * n + a]! -= headingHalf * W[j * n + b]!;
      out[to + b * n + j]! += headingHalf * W[a * n + j]!;
      out[to + j * n + b]! += headingHalf * W[j * n + a]!;
    }
  };
  return {
    n,
    varying,
    cyclic,
    evaluate: (z, W, dW) => {
      metric.evaluate(z, directions, count, W, dW);
      turn(z, W, 0);
      for (let c = 0; c < count; c++) if (c !== headingAt) turn(z, dW, c * n * n);
      spin(W, dW, headingAt * n * n);
    },
  };
}
