/**
 * Proves a stored certificate again from its artifacts and its table of boxes alone, without searching: the boxes must
 * tile the box of active coordinates exactly and every one must pass with the bounds that the table says.
 */
import { cellProver } from "./cellProver.js";
import type { ProofClaims, ProofSubject } from "./claims.js";
import { type LeafTable, leavesOf } from "./leafTable.js";
import { tilingFault } from "./tiling.js";

export interface RecheckResult {
  /** True only when every claim is shown over the whole box again. */
  readonly holds: boolean;
  readonly boxes: number;
  /** What is wrong, at most MOST_FAULTS entries. */
  readonly faults: readonly string[];
}

const MOST_FAULTS = 20;

export function recheck(
  subject: ProofSubject,
  claims: ProofClaims,
  table: LeafTable,
  progress: (done: number, total: number, note: string) => void = () => undefined,
): RecheckResult {
  const failed = (fault: string): RecheckResult => ({ holds: false, boxes: table.count, faults: [fault] });
  const prover = cellProver(subject, claims);
  if (table.dimension !== prover.dimension)
    return failed(`the boxes have ${table.dimension} coordinates, the plant ${prover.dimension} active ones`);
  let leaves: ReturnType<typeof leavesOf>;
  try {
    leaves = leavesOf(table, claims);
  } catch (error) {
    return failed((error as Error).message);
  }
  const gap = tilingFault(table);
  if (gap !== null) return failed(gap);
  const faults: string[] = [];
  for (const [i, { status, lower, upper, bounds }] of leaves.entries()) {
    if (i % 256 === 0) progress(i, leaves.length, "boxes");
    if (status === "proved" && prover.confirm(lower, upper, bounds)) continue;
    const where = Array.from(lower, (low, k) => `${low} .. ${upper[k]}`).join(", ");
    faults.push(
      status === "proved" ? `box ${i} [${where}] does not pass again` : `box ${i} [${where}] is ${status}, not proved`,
    );
    if (faults.length >= MOST_FAULTS) break;
  }
  return { holds: faults.length === 0, boxes: leaves.length, faults };
}
