/**
 * The input nearest to the plan's in |D (u - u*)|, D = diag(1 / limit_j), under one linear inequality and a box:
 *   least sum_j (v_j / limit_j)^2 with excess + b^T v <= 0, -1 <= u*_j + v_j <= 1, v = u - u*.
 * Without the box it is the projection v = -mu D^{-2} b, mu = excess / |D^{-1} b|^2. With it, v_j(mu) is that cut to the box
 * (Karush, Kuhn, Tucker; continuous quadratic knapsack: Helgason, Kennington, Lall, Mathematical Programming 18, 1980),
 * b^T v(mu) falls piecewise linearly in mu, and mu is found by cutting one more input a time: at most m rounds.
 */
export interface NearestInput {
  /**
   * plan: the plan's own input will do.  corrected: met, no input at its limit.  saturated: met with an input held at its
   * limit.  short: no input in the box meets it; the one that comes nearest to it.  noControl: b = 0, the plan's input.
   */
  status: "plan" | "corrected" | "saturated" | "short" | "noControl";
  /** What is left of excess + b^T v when it is not met; 0 otherwise. */
  shortfall: number;
}

/** b, limits, planned, u: m. A planned input outside [-1, 1] is cut to it first. Writes u and result. */
export function nearestInput(
  excess: number,
  b: Float64Array,
  limits: Float64Array,
  planned: Float64Array,
  u: Float64Array,
  result: NearestInput,
): void {
  const m = b.length;
  let left = excess;
  let gain = 0;
  let outside = false;
  for (let j = 0; j < m; j++) {
    const inside = cut(planned[j]!);
    if (inside !== planned[j]) outside = true;
    u[j] = inside;
    left += b[j]! * (inside - planned[j]!);
    gain = Math.max(gain, Math.abs(b[j]!));
  }
  result.shortfall = 0;
  if (left <= 0 || gain === 0) {
    result.status = left > 0 ? "noControl" : outside ? "saturated" : "plan";
    result.shortfall = Math.max(0, left);
    return;
  }
  // inputs at the limit that they are pushed to are held there; the others share what is left
  for (let round = 0; round <= m; round++) {
    let held = left;
    let square = 0;
    result.status = outside ? "saturated" : "corrected";
    for (let j = 0; j < m; j++) {
      if (!atLimit(u[j]!, b[j]!)) square += (b[j]! * limits[j]!) ** 2;
      else {
        held += b[j]! * (u[j]! - cut(planned[j]!));
        result.status = "saturated";
      }
    }
    if (square === 0) {
      if (held > 0) result.status = "short";
      result.shortfall = Math.max(0, held);
      return;
    }
    const mu = held / square;
    let cuts = false;
    for (let j = 0; j < m; j++) {
      const wanted = cut(planned[j]!) - mu * limits[j]! ** 2 * b[j]!;
      if (atLimit(u[j]!, b[j]!) || Math.abs(wanted) <= 1) continue;
      u[j] = cut(wanted);
      cuts = true;
    }
    if (cuts) continue;
    for (let j = 0; j < m; j++) {
      if (!atLimit(u[j]!, b[j]!)) u[j] = cut(planned[j]!) - mu * limits[j]! ** 2 * b[j]!;
    }
    return;
  }
}

function cut(value: number): number {
  return Math.min(1, Math.max(-1, value));
}

/** The input is at the limit that lowering b_j u_j pushes it to. */
function atLimit(value: number, b: number): boolean {
  return (b > 0 && value <= -1) || (b < 0 && value >= 1);
}
