/**
 * The cells that a proof ended with: they tile the box [-1, 1]^d of the active coordinates exactly. A cell is proved (all
 * claims hold on it, and its own bounds are at least as good), refuted (a claim certainly fails at a point of it) or open.
 * Columns are plain numbers, so the table can be saved, and resumed from.
 */
import type { CellBounds, ClaimName, ListedClaims } from "./claims.js";

export type LeafStatus = "proved" | "refuted" | "open";

export interface Leaf {
  readonly lower: Float64Array;
  readonly upper: Float64Array;
  readonly status: LeafStatus;
  /** Proved cells: their bounds. Others: a rate that holds, -Infinity when none is known, the rest Infinity. */
  readonly bounds: CellBounds;
  /** Claim that stopped a cell that is not proved. */
  readonly claim: ClaimName | null;
}

const STATUS: readonly LeafStatus[] = ["open", "proved", "refuted"];
const CLAIMS: readonly ClaimName[] = ["rate", "push", "spread", "authority", "definite"];

/** The same, one array a column. */
export interface LeafTable {
  readonly dimension: number;
  readonly count: number;
  /** count x dimension. */
  readonly lower: Float64Array;
  readonly upper: Float64Array;
  /** 0 open, 1 proved, 2 refuted. */
  readonly status: Uint8Array;
  /** 0: none; else 1 + place in rate, push, spread, authority, definite. */
  readonly claim: Uint8Array;
  readonly rate: Float64Array;
  /** count x number of push claims. */
  readonly pushes: Float64Array;
  /** count x number of spread claims. */
  readonly spreads: Float64Array;
  readonly authority: Float64Array;
}

export function leafTable(leaves: readonly Leaf[], dimension: number, claims: ListedClaims): LeafTable {
  const [pushes, spreads] = [claims.pushes.length, claims.spreads.length];
  const count = leaves.length;
  const table: LeafTable = {
    dimension,
    count,
    lower: new Float64Array(count * dimension),
    upper: new Float64Array(count * dimension),
    status: new Uint8Array(count),
    claim: new Uint8Array(count),
    rate: new Float64Array(count),
    pushes: new Float64Array(count * pushes),
    spreads: new Float64Array(count * spreads),
    authority: new Float64Array(count),
  };
  for (const [i, leaf] of leaves.entries()) {
    table.lower.set(leaf.lower, i * dimension);
    table.upper.set(leaf.upper, i * dimension);
    table.status[i] = STATUS.indexOf(leaf.status);
    table.claim[i] = leaf.claim === null ? 0 : 1 + CLAIMS.indexOf(leaf.claim);
    table.rate[i] = leaf.bounds.rate;
    table.pushes.set(leaf.bounds.pushes, i * pushes);
    table.spreads.set(leaf.bounds.spreads, i * spreads);
    table.authority[i] = leaf.bounds.authority;
  }
  return table;
}

/** Leaves of a table; throws when its columns do not fit each other. */
export function leavesOf(table: LeafTable, claims: ListedClaims): Leaf[] {
  const [pushes, spreads] = [claims.pushes.length, claims.spreads.length];
  const { dimension: d, count } = table;
  const fits =
    [table.lower, table.upper].every((column) => column.length === count * d) &&
    [table.status, table.claim, table.rate, table.authority].every((column) => column.length === count) &&
    table.pushes.length === count * pushes &&
    table.spreads.length === count * spreads;
  if (!fits)
    throw new Error("a table of proved boxes whose columns have different lengths: it was cut or is of another proof");
  return Array.from({ length: count }, (_, i): Leaf => {
    const status = STATUS[table.status[i]!];
    if (status === undefined)
      throw new Error(`box ${i} of the table has the status ${table.status[i]}; allowed are 0, 1, 2`);
    return {
      lower: table.lower.slice(i * d, (i + 1) * d),
      upper: table.upper.slice(i * d, (i + 1) * d),
      status,
      claim: CLAIMS[table.claim[i]! - 1] ?? null,
      bounds: {
        rate: table.rate[i]!,
        pushes: Array.from(table.pushes.subarray(i * pushes, (i + 1) * pushes)),
        spreads: Array.from(table.spreads.subarray(i * spreads, (i + 1) * spreads)),
        authority: table.authority[i]!,
      },
    };
  });
}

/** Share of the box [-1, 1]^d; exact for boxes made by halving, as long as float64 holds the power of two. */
export function shareOf(lower: Float64Array, upper: Float64Array): number {
  let share = 1;
  for (let i = 0; i < lower.length; i++) share *= (upper[i]! - lower[i]!) / 2;
  return share;
}
