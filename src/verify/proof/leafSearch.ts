/**
 * Finds the proved cells that a part of the box touches, by a tree of bounding boxes: what a tube along a plan may rely on
 * there.
 */
import type { CellBounds, ListedClaims } from "./claims.js";
import { type Leaf, type LeafTable, leavesOf } from "./leafTable.js";

export interface LeafSearch {
  /** Leaves that share a point with [lower, upper] (active coordinates, scaled), faces included. */
  touching(lower: Float64Array, upper: Float64Array): readonly Leaf[];
  /** Worst bounds over these leaves; null when one of them is not proved or the part reaches out of [-1, 1]. */
  worst(lower: Float64Array, upper: Float64Array): CellBounds | null;
}

interface Branch {
  readonly lower: Float64Array;
  readonly upper: Float64Array;
  readonly leaf: Leaf | null;
  readonly parts: readonly Branch[];
}

/** claims: those of the table. */
export function leafSearch(table: LeafTable, claims: ListedClaims): LeafSearch {
  const leaves = leavesOf(table, claims);
  const root = leaves.length === 0 ? null : branch(leaves, table.dimension);
  const touching = (lower: Float64Array, upper: Float64Array): Leaf[] => {
    const found: Leaf[] = [];
    const visit = (node: Branch): void => {
      for (let i = 0; i < lower.length; i++) if (node.lower[i]! > upper[i]! || node.upper[i]! < lower[i]!) return;
      if (node.leaf !== null) found.push(node.leaf);
      for (const part of node.parts) visit(part);
    };
    if (root !== null) visit(root);
    return found;
  };
  const worst: LeafSearch["worst"] = (lower, upper) => {
    if (!lower.every((v, i) => v >= -1 && upper[i]! <= 1)) return null;
    const found = touching(lower, upper);
    if (found.length === 0 || found.some(({ status }) => status !== "proved")) return null;
    const bounds = found.map((leaf) => leaf.bounds);
    return bounds.reduce((a, b) => ({
      rate: Math.min(a.rate, b.rate),
      pushes: a.pushes.map((value, c) => Math.max(value, b.pushes[c]!)),
      spreads: a.spreads.map((value, s) => Math.max(value, b.spreads[s]!)),
      authority: Math.max(a.authority, b.authority),
    }));
  };
  return { touching, worst };
}

/** A bounding-box tree: leaves ordered along the longest edge of their hull, cut in two. */
function branch(leaves: readonly Leaf[], d: number): Branch {
  const lower = new Float64Array(d).fill(Number.POSITIVE_INFINITY);
  const upper = new Float64Array(d).fill(Number.NEGATIVE_INFINITY);
  for (const leaf of leaves) {
    for (let i = 0; i < d; i++) {
      lower[i] = Math.min(lower[i]!, leaf.lower[i]!);
      upper[i] = Math.max(upper[i]!, leaf.upper[i]!);
    }
  }
  if (leaves.length === 1) return { lower, upper, leaf: leaves[0]!, parts: [] };
  let axis = 0;
  for (let i = 1; i < d; i++) if (upper[i]! - lower[i]! > upper[axis]! - lower[axis]!) axis = i;
  const middle = (leaf: Leaf): number => leaf.lower[axis]! + leaf.upper[axis]!;
  const sorted = [...leaves].sort((a, b) => middle(a) - middle(b));
  const half = sorted.length >> 1;
  return { lower, upper, leaf: null, parts: [branch(sorted.slice(0, half), d), branch(sorted.slice(half), d)] };
}
