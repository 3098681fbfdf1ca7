/**
 * The vector c of the asked margin at a metric W: where c^T W c is the worst spread and so its derivative is c c^T.
 */
import type { BodyFrame } from "../model/controlAffine.js";
import type { MarginGoal } from "../plant/plant.js";

export function goalVector(goal: MarginGoal, n: number, frame: BodyFrame | null): (W: Float64Array) => Float64Array {
  const unit = (i: number): Float64Array => Float64Array.from({ length: n }, (_, k) => (k === i ? 1 : 0));
  if (goal.kind === "state" && !(frame?.position.includes(goal.state) ?? false)) {
    const c = unit(goal.state);
    return () => c;
  }
  if (frame === null)
    throw new Error(`a '${goal.kind}' margin needs a declared planar rotation; the plant declares none`);
  const [a, b] = frame.position;
  if (goal.kind === "along" || goal.kind === "across") {
    const c = unit(goal.kind === "along" ? a : b);
    return () => c;
  }
  return (W) => {
    // top eigenvector of [[xx, xy], [xy, yy]] at half the angle of (xx - yy, 2 xy)
    const angle = Math.atan2(2 * W[a * n + b]!, W[a * n + a]! - W[b * n + b]!) / 2;
    const c = new Float64Array(n);
    c[a] = Math.cos(angle);
    c[b] = Math.sin(angle);
    return c;
  };
}
