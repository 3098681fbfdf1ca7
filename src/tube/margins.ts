/**
 * The numbers that a planner takes: a margin for each state and direction, the authority, and the part of the envelope
 * in which plans must stay for the claim to hold (design: the envelope less the margins, the inputs less the authority).
 */
export interface Range {
  readonly low: number;
  readonly high: number;
}

/** The range less a margin on both sides; null when nothing is left. */
export function shrunk(range: Range, margin: number): Range | null {
  const low = range.low + margin;
  const high = range.high - margin;
  return low < high ? { low, high } : null;
}

/** Margin of c^T x in the unit of a coordinate whose half-range is `half` in that unit. */
export function marginOf(radius: number, spread: number, half: number): number {
  return radius * Math.sqrt(spread) * half;
}
