/**
 * Exact tests that need only exchangeability. Conformal p-value of one new score: (1 + number of reference scores at
 * least as large) / (K + 1) (Vovk, Gammerman and Shafer, "Algorithmic Learning in a Random World", 2005). Rank-sum test
 * of several: Mann and Whitney, "On a test of whether one of two random variables is stochastically larger than the
 * other", Ann. Math. Stat. 18(1), 1947; its null distribution by the recursion given there. One-sided: new is larger.
 * Ties count against a finding: a tied pair counts as "reference is larger".
 */

export function conformalPValue(score: number, reference: readonly number[]): number {
  return (1 + reference.filter((other) => other >= score).length) / (reference.length + 1);
}

/** Probability, when all scores are exchangeable, of new scores at least as high in rank; 1 when one of the lists is empty. */
export function rankSumPValue(fresh: readonly number[], reference: readonly number[]): number {
  const [m, n] = [fresh.length, reference.length];
  if (m === 0 || n === 0) return 1;
  let above = 0;
  for (const score of fresh) above += reference.filter((other) => other < score).length;
  const counts = mannWhitneyShares(m, n);
  let tail = 0;
  for (let u = above; u <= m * n; u++) tail += counts[u]!;
  return Math.min(1, tail);
}

/** Shares of the values 0 .. m n of Mann and Whitney's U, for m and n scores. */
export function mannWhitneyShares(m: number, n: number): Float64Array {
  // row j: shares for i new scores and j reference ones; U grows by j when the largest of all is a new one
  let previous: Float64Array[] = Array.from({ length: n + 1 }, () => Float64Array.of(1));
  for (let i = 1; i <= m; i++) {
    const row: Float64Array[] = [Float64Array.of(1)];
    for (let j = 1; j <= n; j++) {
      const shares = new Float64Array(i * j + 1);
      const fresh = i / (i + j);
      previous[j]!.forEach((share, u) => {
        shares[u + j]! += fresh * share;
      });
      row[j - 1]!.forEach((share, u) => {
        shares[u]! += (1 - fresh) * share;
      });
      row.push(shares);
    }
    previous = row;
  }
  return previous[n]!;
}

/** Holm's step-down adjustment (Scand. J. Stat. 6(2), 1979): adjusted p-values, in the given order. */
export function holmAdjusted(pValues: readonly number[]): number[] {
  const order = pValues.map((p, i) => ({ p, i })).sort((a, b) => a.p - b.p);
  const adjusted = new Array<number>(pValues.length).fill(1);
  let running = 0;
  for (const [rank, { p, i }] of order.entries()) {
    running = Math.max(running, Math.min(1, (pValues.length - rank) * p));
    adjusted[i] = running;
  }
  return adjusted;
}
