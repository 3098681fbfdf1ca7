/**
 * The largest value of a function over the box [-1, 1]^d, sampled: low-discrepancy points, the box's corners and
 * centre first, then compass search from the best of them (Kolda, Lewis and Torczon, "Optimization by Direct Search",
 * SIAM Review 45(3), 2003, section 3): the functions are eigenvalues of matrices and have kinks, so no gradients.
 * It finds failures; it never shows that there are none.
 */
export interface Extreme {
  readonly value: number;
  /** d. */
  readonly at: Float64Array;
}

export interface ScanOptions {
  readonly dimension: number;
  /** Scan points, flat, count x d, in [-1, 1]. */
  readonly points: Float64Array;
  /** How many of the best scan points are driven upwards. */
  readonly starts: number;
  /** The search stops when its step is below this share of the half-range. */
  readonly tolerance: number;
}

export function largest(evaluate: (at: Float64Array) => number, options: ScanOptions): Extreme {
  return refined(evaluate, scan(evaluate, options), options);
}

/** The `starts` largest values among the scan points, largest first. */
export function scan(evaluate: (at: Float64Array) => number, options: ScanOptions): Extreme[] {
  return ranked(valuesAt(evaluate, options), options);
}

/** A value a scan point. */
export function valuesAt(evaluate: (at: Float64Array) => number, { dimension: d, points }: ScanOptions): Float64Array {
  const count = d === 0 ? 1 : points.length / d;
  return Float64Array.from({ length: count }, (_, i) => evaluate(points.subarray(i * d, (i + 1) * d)));
}

/** The `starts` largest of the values at the scan points, largest first. */
export function ranked(values: Float64Array, { dimension: d, points, starts }: ScanOptions): Extreme[] {
  const best: Extreme[] = [];
  for (const [i, value] of values.entries()) {
    const at = points.subarray(i * d, (i + 1) * d);
    if (best.length < starts || value > best.at(-1)!.value) {
      const place = best.findIndex((other) => value > other.value);
      best.splice(place < 0 ? best.length : place, 0, { value, at: at.slice() });
      if (best.length > starts) best.pop();
    }
  }
  return best;
}

export function refined(
  evaluate: (at: Float64Array) => number,
  starts: readonly Extreme[],
  options: Pick<ScanOptions, "tolerance">,
): Extreme {
  return starts
    .map((start) => compassSearch(evaluate, start, options.tolerance))
    .reduce((a, b) => (b.value > a.value ? b : a));
}

function compassSearch(evaluate: (at: Float64Array) => number, start: Extreme, tolerance: number): Extreme {
  const at = start.at.slice();
  const d = at.length;
  let value = start.value;
  let step = 0.1;
  while (step > tolerance && value < Number.POSITIVE_INFINITY) {
    let moved = false;
    for (let i = 0; i < d; i++) {
      for (const sign of [-1, 1]) {
        const held = at[i]!;
        at[i] = Math.min(1, Math.max(-1, held + sign * step));
        const next = at[i] === held ? value : evaluate(at);
        if (next > value) {
          value = next;
          moved = true;
        } else at[i] = held;
      }
    }
    if (!moved) step /= 2;
  }
  return { value, at };
}
