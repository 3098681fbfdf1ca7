/**
 * What the constant-metric problem needs of one state: scaled states (n), inputs in [-1, 1]^m at their corners. With a
 * declared rotation W is the body frame's and all is at heading zero: F(v) of the contraction condition is
 *   F = K W + W K^T + 2 lambda W,   K = A(v) - psidot(v) S,   A(v) = dfdx + sum_j v_j dBdx_j,
 * S = [[0, -1], [1, 0]] on the position pair and psidot the heading's rate in rad/s.
 */
import { type ControlAffineModel, type ModelPoint, newModelPoint } from "../model/controlAffine.js";

export interface ConditionSample {
  /** K at each input corner, n x n. */
  readonly jacobians: readonly Float64Array[];
  /** n x m. */
  readonly B: Float64Array;
  /** n x p. */
  readonly G: Float64Array;
}

/** corners: the input corners, each m; active: the active coordinates of a state. */
export function conditionSample(
  model: ControlAffineModel,
  corners: readonly Float64Array[],
  active: Float64Array,
): ConditionSample {
  const { n, m, p } = model;
  const z = new Float64Array(n);
  const point = newModelPoint(n, m, p);
  model.embed(active, z);
  model.evaluate(z, point);
  return { jacobians: corners.map((v) => frameJacobian(model, point, v)), B: point.B, G: point.G };
}

/** K of a point at heading zero and inputs v (m), n x n. */
export function frameJacobian(
  { n, m, rotation }: ControlAffineModel,
  point: ModelPoint,
  v: Float64Array,
): Float64Array {
  const K = point.dfdx.slice();
  for (let j = 0; j < m; j++) for (let i = 0; i < n * n; i++) K[i]! += v[j]! * point.dBdx[j * n * n + i]!;
  if (rotation === null) return K;
  const { heading, headingHalf, position } = rotation;
  let psidot = point.f[heading]!;
  for (let j = 0; j < m; j++) psidot += point.B[heading * m + j]! * v[j]!;
  psidot *= headingHalf;
  const [a, b] = position;
  K[b * n + a]! -= psidot;
  K[a * n + b]! += psidot;
  return K;
}
