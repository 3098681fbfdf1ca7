/**
 * Do boxes tile [-1, 1]^d: no gap, no overlap beyond faces? Cells come from halving, so a set that tiles can be parted by
 * halving again: some coordinate's middle that no box straddles parts it, and each half must be tiled by its part. (If a
 * set tiles and its tree first halves along i, then for any other j that no box straddles, each half along j is tiled by
 * the tree cut down to it; so the first such coordinate will do.) Ends are compared exactly.
 */
export interface Boxes {
  readonly dimension: number;
  readonly count: number;
  /** count x dimension. */
  readonly lower: Float64Array;
  readonly upper: Float64Array;
}

/** Null when the boxes tile; else where and why not. */
export function tilingFault({ dimension: d, count, lower, upper }: Boxes): string | null {
  const part = (members: readonly number[], from: Float64Array, to: Float64Array): string | null => {
    const isWhole = (b: number): boolean => {
      for (let i = 0; i < d; i++) if (lower[b * d + i] !== from[i] || upper[b * d + i] !== to[i]) return false;
      return true;
    };
    if (members.length === 0) return `no box covers ${describe(from, to)}`;
    if (members.some(isWhole)) return members.length === 1 ? null : `boxes overlap within ${describe(from, to)}`;
    for (let i = 0; i < d; i++) {
      const middle = from[i]! / 2 + to[i]! / 2;
      const isClear = members.every((b) => upper[b * d + i]! <= middle || lower[b * d + i]! >= middle);
      if (!isClear) continue;
      const left = members.filter((b) => upper[b * d + i]! <= middle);
      const right = members.filter((b) => upper[b * d + i]! > middle);
      const [low, high] = [from.slice(), to.slice()];
      high[i] = middle;
      low[i] = middle;
      return part(left, from, high) ?? part(right, low, to);
    }
    return `${members.length} boxes in ${describe(from, to)} overlap or leave a gap`;
  };
  for (let b = 0; b < count; b++) {
    for (let i = 0; i < d; i++) {
      const [low, high] = [lower[b * d + i]!, upper[b * d + i]!];
      if (!(low >= -1 && high <= 1 && low < high)) return `box ${b} runs from ${low} to ${high} in coordinate ${i}`;
    }
  }
  const from = new Float64Array(d).fill(-1);
  return part(
    Array.from({ length: count }, (_, b) => b),
    from,
    from.map((v) => -v),
  );
}

function describe(from: Float64Array, to: Float64Array): string {
  return `[${Array.from(from, (low, i) => `${low} .. ${to[i]}`).join(", ")}]`;
}
