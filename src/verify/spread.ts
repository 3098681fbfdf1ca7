/**
 * c^T W c for the directions in which a margin is asked, at one state; margin = R sqrt(sup c^T W c).
 *   state i          W_ii; for a coordinate of a rotated position pair the worst heading, so the pair's largest eigenvalue
 *   planar           largest eigenvalue of the pair's block
 *   along, across    the planned heading's axis and its normal, seen from an actual heading up to `headingError` (rad)
 *                    off: c(d) = (cos d, sin d), so c^T W c = mean + amplitude cos(2 d - phase): closed form
 */
import type { BodyFrame } from "../model/controlAffine.js";

export type MarginDirection =
  | { readonly kind: "state"; readonly state: number }
  | { readonly kind: "planar" }
  | { readonly kind: "along" | "across"; readonly headingError: number };

export function spread(W: Float64Array, n: number, frame: BodyFrame | null, direction: MarginDirection): number {
  if (direction.kind === "state") {
    const isRotated = frame?.position.includes(direction.state) ?? false;
    if (!isRotated) return W[direction.state * n + direction.state]!;
  }
  if (frame === null)
    throw new Error(`a '${direction.kind}' margin needs a declared planar rotation; the plant declares none`);
  const [a, b] = frame.position;
  const xx = W[a * n + a]!;
  const yy = W[b * n + b]!;
  const xy = W[a * n + b]!;
  const mean = (xx + yy) / 2;
  const amplitude = Math.hypot((xx - yy) / 2, xy);
  if (direction.kind === "state" || direction.kind === "planar") return mean + amplitude;
  const phase = Math.atan2(xy, (xx - yy) / 2);
  const axis = direction.kind === "along" ? 0 : Math.PI / 2;
  // the angle 2 d runs over 2 axis +- 2 headingError; the nearest it comes to the phase
  const offset = Math.abs(Math.atan2(Math.sin(2 * axis - phase), Math.cos(2 * axis - phase)));
  return mean + amplitude * Math.cos(Math.max(0, offset - 2 * direction.headingError));
}
