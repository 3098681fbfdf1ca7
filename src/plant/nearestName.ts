/**
 * The allowed name that a misspelt one most likely means: optimal string alignment distance (Boytsov, "Indexing
 * methods for approximate dictionary searching", ACM J. Exp. Algorithmics 16, 2011, section 2.1), letter case ignored.
 */

/** Null when no name is within a third of the given one's length (at least one edit, never all of it). */
export function nearestName(given: string, allowed: Iterable<string>): string | null {
  const limit = Math.min(Math.max(1, Math.floor(given.length / 3)), given.length - 1);
  let best: string | null = null;
  let least = limit + 1;
  for (const name of allowed) {
    const distance = editDistance(given.toLowerCase(), name.toLowerCase());
    if (distance < least) {
      best = name;
      least = distance;
    }
  }
  return best;
}

/** Fewest insertions, deletions, replacements and swaps of neighbours that turn a into b. */
export function editDistance(a: string, b: string): number {
  const width = b.length + 1;
  const table = new Int32Array((a.length + 1) * width);
  const at = (i: number, j: number): number => table[i * width + j]!;
  for (let i = 0; i <= a.length; i++) {
    for (let j = 0; j <= b.length; j++) {
      let least = i + j;
      if (i > 0 && j > 0) {
        least = Math.min(at(i - 1, j) + 1, at(i, j - 1) + 1, at(i - 1, j - 1) + (a[i - 1] === b[j - 1] ? 0 : 1));
        if (i > 1 && j > 1 && a[i - 1] === b[j - 2] && a[i - 2] === b[j - 1]) {
          least = Math.min(least, at(i - 2, j - 2) + 1);
        }
      }
      table[i * width + j] = least;
    }
  }
  return at(a.length, b.length);
}
