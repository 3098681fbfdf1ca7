/**
 * Branch and bound over the box [-1, 1]^d of the active coordinates: examine the worst cell, keep it when all claims hold
 * on it, halve it otherwise. Source: Moore, Kearfott and Cloud, "Introduction to Interval Analysis", SIAM, 2009, chapter 5;
 * best first. What ends as proved is proved; whatever stops the search leaves its cells open.
 *
 *   heap of cells, worst first -> a batch of fixed size -> examine -> proved: a leaf
 *                                                                     refuted: a leaf, once small enough to be told
 *                                                                     undecided: two halves, back on the heap
 *
 * The order depends on the cells alone: batches have one size whatever the number of workers, and no clock is read.
 */

import { cellHeap, type OpenCell } from "./cellHeap.js";
import { type CellProver, type CellResult, cellProver } from "./cellProver.js";
import type { CellBounds, ClaimName, ListedClaims, ProofClaims, ProofSubject } from "./claims.js";
import { type Leaf, type LeafTable, leafTable, leavesOf, shareOf } from "./leafTable.js";

export interface ProofProgress {
  readonly boxes: number;
  readonly provedShare: number;
  readonly openBoxes: number;
  /** 1 and more: how far the worst open cell is from passing; 0 when none is open. */
  readonly worstLoad: number;
}

export interface ProofOptions {
  /** Most cells to examine; the rest stays open. */
  readonly maxBoxes?: number;
  /** Most halvings of a cell a dimension. */
  readonly depthPerDimension?: number;
  /** The search ends with this many refuted points: the claims are false, and no more of them are needed to say so. */
  readonly maxRefuted?: number;
  readonly onProgress?: (progress: ProofProgress) => void;
  readonly signal?: AbortSignal;
  /** Leaves of an earlier run of the same claims: open ones are taken up again. */
  readonly resume?: LeafTable;
  /** Examines batches elsewhere (proofWorkers.ts); by default here. */
  readonly examine?: BatchExaminer;
}

/** Results in the order of the cells. */
export type BatchExaminer = (cells: readonly OpenCell[]) => Promise<readonly CellResult[]>;

export interface RefutedPoint {
  /** Active coordinates, scaled. */
  readonly at: Float64Array;
  readonly claim: ClaimName;
}

export interface ProofResult {
  /** proved: every claim over the whole box. */
  readonly status: "proved" | "refuted" | "open";
  readonly claims: ProofClaims;
  /** A rate proved over the whole box, be it below the claim; null when some cell has none. */
  readonly provedRate: number | null;
  /** Worst bounds over the proved cells; of the whole box when the status is proved. */
  readonly worst: CellBounds;
  readonly provedShare: number;
  readonly refutedShare: number;
  readonly openShare: number;
  readonly refuted: readonly RefutedPoint[];
  readonly leaves: LeafTable;
  /** Cells examined in this run. */
  readonly boxes: number;
}

const BATCH = 128;
const MAX_BOXES = 1_000_000;
const DEPTH_PER_DIMENSION = 16;
/** A refuted cell is halved on until it is this deep a dimension, so that the shares mean something. */
const REFUTED_DEPTH = 3;
const MAX_REFUTED = 200;

export async function prove(
  subject: ProofSubject,
  claims: ProofClaims,
  options: ProofOptions = {},
): Promise<ProofResult> {
  const prover = cellProver(subject, claims);
  const { dimension } = prover;
  const dimensions = Math.max(1, prover.used.length);
  const maxBoxes = options.maxBoxes ?? MAX_BOXES;
  const maxDepth = dimensions * (options.depthPerDimension ?? DEPTH_PER_DIMENSION);
  const maxRefuted = options.maxRefuted ?? MAX_REFUTED;
  const examine = options.examine ?? inline(prover);
  const leaves: Leaf[] = [];
  const refuted: RefutedPoint[] = [];
  const heap = cellHeap();
  start(heap, leaves, options.resume, dimension, claims);
  let boxes = 0;
  let provedShare = leaves.reduce((sum, leaf) => sum + shareOf(leaf.lower, leaf.upper), 0);

  const close = (cell: OpenCell, status: "refuted" | "open", claim: ClaimName): void => {
    leaves.push({ ...box(cell), status, claim, bounds: unknownBounds(prover, cell, claims) });
  };
  const halve = (cell: OpenCell, axis: number, load: number): void => {
    const middle = cell.lower[axis]! / 2 + cell.upper[axis]! / 2;
    for (const side of [0, 1]) {
      const lower = cell.lower.slice();
      const upper = cell.upper.slice();
      (side === 0 ? upper : lower)[axis] = middle;
      heap.push({ lower, upper, depth: cell.depth + 1, load });
    }
  };
  const settle = (cell: OpenCell, result: CellResult): void => {
    if (result.status === "proved") {
      leaves.push({ ...box(cell), status: "proved", claim: null, bounds: result.bounds });
      provedShare += shareOf(cell.lower, cell.upper);
      return;
    }
    if (result.status === "refuted") {
      refuted.push({ at: result.at, claim: result.claim });
      const isSmall = cell.depth >= REFUTED_DEPTH * dimensions;
      // worst first would follow the refuted part to the end; what may still be proved comes before it
      if (isSmall || result.split === null) close(cell, "refuted", result.claim);
      else halve(cell, result.split, 1);
      return;
    }
    if (result.split === null || cell.depth >= maxDepth) close(cell, "open", result.claim);
    else halve(cell, result.split, result.load);
  };

  const isOver = (): boolean => boxes >= maxBoxes || refuted.length >= maxRefuted || (options.signal?.aborted ?? false);
  while (heap.size() > 0 && !isOver()) {
    const batch = heap.pop(Math.min(BATCH, maxBoxes - boxes));
    const results = await examine(batch);
    batch.forEach((cell, i) => {
      settle(cell, results[i]!);
    });
    boxes += batch.length;
    options.onProgress?.({ boxes, provedShare, openBoxes: heap.size(), worstLoad: heap.worstLoad() });
  }
  for (const cell of heap.pop(heap.size())) close(cell, "open", "rate");
  return summary(claims, leaves, refuted, dimension, boxes);
}

/** Examines in this thread; lets others have their turn between batches, so that a signal can arrive. */
function inline(prover: CellProver): BatchExaminer {
  return async (cells) => {
    await new Promise((resolve) => setImmediate(resolve));
    return cells.map(({ lower, upper }) => prover.examine(lower, upper));
  };
}

function box({ lower, upper }: OpenCell) {
  return { lower, upper };
}

function unknownBounds(prover: CellProver, { lower, upper }: OpenCell, claims: ListedClaims): CellBounds {
  const none = Number.POSITIVE_INFINITY;
  return {
    rate: prover.rateBelow(lower, upper),
    pushes: claims.pushes.map(() => none),
    spreads: claims.spreads.map(() => none),
    authority: none,
  };
}

function start(
  heap: ReturnType<typeof cellHeap>,
  leaves: Leaf[],
  resume: LeafTable | undefined,
  dimension: number,
  claims: ListedClaims,
): void {
  if (resume === undefined) {
    const lower = new Float64Array(dimension).fill(-1);
    heap.push({ lower, upper: lower.map((v) => -v), depth: 0, load: Number.POSITIVE_INFINITY });
    return;
  }
  if (resume.dimension !== dimension)
    throw new Error(
      `boxes of ${resume.dimension} coordinates cannot be resumed for a plant with ${dimension} active ones`,
    );
  for (const leaf of leavesOf(resume, claims)) {
    if (leaf.status === "proved") leaves.push(leaf);
    else
      heap.push({
        lower: leaf.lower,
        upper: leaf.upper,
        depth: Math.round(-Math.log2(shareOf(leaf.lower, leaf.upper))),
        load: 1,
      });
  }
}

function summary(
  claims: ProofClaims,
  leaves: readonly Leaf[],
  refuted: readonly RefutedPoint[],
  dimension: number,
  boxes: number,
): ProofResult {
  const share = (status: Leaf["status"]): number =>
    leaves.filter((l) => l.status === status).reduce((sum, l) => sum + shareOf(l.lower, l.upper), 0);
  const has = (status: Leaf["status"]): boolean => leaves.some((l) => l.status === status);
  const proved = leaves.filter((l) => l.status === "proved").map((l) => l.bounds);
  const most = (value: (bounds: CellBounds) => number): number =>
    proved.reduce((worst, bounds) => Math.max(worst, value(bounds)), 0);
  const rate = leaves.reduce((least, l) => Math.min(least, l.bounds.rate), Number.POSITIVE_INFINITY);
  const isWhole = !has("refuted") && !has("open");
  return {
    status: isWhole ? "proved" : refuted.length > 0 ? "refuted" : "open",
    claims,
    provedRate: Number.isFinite(rate) ? rate : null,
    worst: {
      rate: proved.reduce((least, bounds) => Math.min(least, bounds.rate), Number.POSITIVE_INFINITY),
      pushes: claims.pushes.map((_, c) => most((b) => b.pushes[c]!)),
      spreads: claims.spreads.map((_, s) => most((b) => b.spreads[s]!)),
      authority: most((b) => b.authority),
    },
    provedShare: isWhole ? 1 : share("proved"),
    refutedShare: share("refuted"),
    openShare: share("open"),
    refuted,
    leaves: leafTable(leaves, dimension, claims),
    boxes,
  };
}
