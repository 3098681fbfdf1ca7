/**
 * Proved bounds around a plan: the leaf boxes of the certificate's proof, halved where the tube touches them and proved
 * again, so that what is local is not as coarse as the proof of the whole needed to be. Each channel's push is proved by
 * itself: within a window the channels may be worst at different states (planTube.ts).
 */

import type { LocalBounds } from "../tube/planTube.js";
import { cellProver } from "../verify/proof/cellProver.js";
import type { ProofClaims } from "../verify/proof/claims.js";
import { leafSearch } from "../verify/proof/leafSearch.js";
import type { Leaf, LeafTable } from "../verify/proof/leafTable.js";
import type { SavedCertificate } from "./proveTube.js";

export interface PlanCells {
  /** Worst bounds over the cells that share a point with the box; null when one of them is not proved. */
  local(lower: Float64Array, upper: Float64Array): LocalBounds | null;
  /** The same for a law of another rate: a cell counts as proved when its authority density there is at most `most`. */
  localAt(rate: number, most: number): PlanCells["local"];
  /** A touched leaf box without proof, or null. */
  unproved(lower: Float64Array, upper: Float64Array): Leaf | null;
  /** Cells used so far. */
  readonly count: number;
}

/** A leaf or a part of one; bounds and parts are made when first asked for. */
interface Cell {
  readonly lower: Float64Array;
  readonly upper: Float64Array;
  readonly parent: LocalBounds | null;
  bounds: LocalBounds | null;
  parts: readonly Cell[] | null;
}

/** Cells are halved to a size of which the whole box holds this power of two, or to the finest edge; its own edge is 2. */
const CELL_HALVINGS = 12;
const FINEST_EDGE = 1 / 32;

/** claims: those that the boxes prove. active: states of the active coordinates, in order. */
export function planCells(
  subject: SavedCertificate,
  claims: ProofClaims,
  boxes: LeafTable,
  active: readonly number[],
): PlanCells {
  const search = leafSearch(boxes, claims);
  const widthAt = active.map((state) =>
    claims.spreads.findIndex(({ direction }) => direction.kind === "state" && direction.state === state),
  );
  const prover = cellProver(subject, claims);
  const longestEdge = Math.max(FINEST_EDGE, 2 ** (1 - Math.floor(CELL_HALVINGS / Math.max(1, prover.used.length))));
  const roots = new Map<Leaf, Cell>();
  const used = new Set<Cell>();

  const boundsOf = (cell: Cell, fallback: Leaf["bounds"] | null): LocalBounds => {
    const result = fallback === null ? prover.examine(cell.lower, cell.upper) : null;
    const own = result === null ? fallback : result.status === "proved" ? result.bounds : null;
    // a part that is not shown by itself keeps what is shown of the whole
    if (own === null) return cell.parent!;
    const { parent } = cell;
    return {
      rate: Math.max(own.rate, parent?.rate ?? Number.NEGATIVE_INFINITY),
      pushes: own.pushes.map((value, c) => Math.min(value, parent?.pushes[c] ?? Number.POSITIVE_INFINITY)),
      widths: widthAt.map((s, i) => Math.min(own.spreads[s]!, parent?.widths[i] ?? Number.POSITIVE_INFINITY)),
      spreads: own.spreads.map((value, s) => Math.min(value, parent?.spreads[s] ?? Number.POSITIVE_INFINITY)),
      authority: Math.min(own.authority, parent?.authority ?? Number.POSITIVE_INFINITY),
    };
  };

  const partsOf = (cell: Cell): readonly Cell[] => {
    if (cell.parts !== null) return cell.parts;
    let axis = -1;
    let longest = longestEdge;
    for (const i of prover.used) {
      const edge = cell.upper[i]! - cell.lower[i]!;
      if (edge <= longest) continue;
      longest = edge;
      axis = i;
    }
    cell.parts = axis < 0 ? [] : [0, 1].map((side) => half(cell, axis, side));
    return cell.parts;
  };

  const visit = (cell: Cell, lower: Float64Array, upper: Float64Array, found: Cell[]): void => {
    for (let i = 0; i < lower.length; i++) if (cell.lower[i]! > upper[i]! || cell.upper[i]! < lower[i]!) return;
    cell.bounds ??= boundsOf(cell, null);
    const parts = partsOf(cell);
    if (parts.length === 0) found.push(cell);
    for (const part of parts) visit(part, lower, upper, found);
  };

  const rootOf = (leaf: Leaf): Cell => {
    const known = roots.get(leaf);
    if (known !== undefined) return known;
    const cell: Cell = { lower: leaf.lower, upper: leaf.upper, parent: null, bounds: null, parts: null };
    cell.bounds = boundsOf(cell, leaf.bounds);
    roots.set(leaf, cell);
    return cell;
  };

  const touched = (lower: Float64Array, upper: Float64Array): readonly Cell[] | null => {
    const leaves = search.touching(lower, upper);
    if (leaves.length === 0 || leaves.some(({ status }) => status !== "proved")) return null;
    const found: Cell[] = [];
    for (const leaf of leaves) visit(rootOf(leaf), lower, upper, found);
    for (const cell of found) used.add(cell);
    return found;
  };

  return {
    local: (lower, upper) =>
      touched(lower, upper)
        ?.map((cell) => cell.bounds!)
        .reduce(worse) ?? null,
    localAt: (rate, most) => {
      const atRate = cellProver(subject, { rate: claims.rate, pushes: [], spreads: [], authority: { rate, most } });
      const authorities = new Map<Cell, number>();
      const authorityOf = (cell: Cell): number => {
        const known = authorities.get(cell);
        if (known !== undefined) return known;
        const result = atRate.examine(cell.lower, cell.upper);
        const authority = result.status === "proved" ? result.bounds.authority : Number.POSITIVE_INFINITY;
        authorities.set(cell, authority);
        return authority;
      };
      return (lower, upper) => {
        const cells = touched(lower, upper);
        if (cells?.some((cell) => authorityOf(cell) > most) ?? true) return null;
        return cells!.map((cell) => ({ ...cell.bounds!, authority: authorityOf(cell) })).reduce(worse);
      };
    },
    unproved: (lower, upper) => search.touching(lower, upper).find(({ status }) => status !== "proved") ?? null,
    get count() {
      return used.size;
    },
  };
}

function half(cell: Cell, axis: number, side: number): Cell {
  const middle = cell.lower[axis]! / 2 + cell.upper[axis]! / 2;
  const lower = cell.lower.slice();
  const upper = cell.upper.slice();
  (side === 0 ? upper : lower)[axis] = middle;
  return { lower, upper, parent: cell.bounds, bounds: null, parts: null };
}

function worse(a: LocalBounds, b: LocalBounds): LocalBounds {
  const larger = (x: readonly number[], y: readonly number[]): number[] => x.map((value, i) => Math.max(value, y[i]!));
  return {
    rate: Math.min(a.rate, b.rate),
    pushes: larger(a.pushes, b.pushes),
    widths: larger(a.widths, b.widths),
    spreads: larger(a.spreads, b.spreads),
    authority: Math.max(a.authority, b.authority),
  };
}
