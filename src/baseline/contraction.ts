/**
 * Which rates a constant dual metric can have at all, whatever the authority: by Finsler's lemma a gain exists exactly
 * where P^T (K W + W K^T + 2 rate W) P < 0, P a basis of null(B^T) (Boyd, El Ghaoui, Feron and Balakrishnan, "Linear
 * Matrix Inequalities in System and Control Theory", 1994, section 2.6.2). W is fixed in size by 0 < W <= I; the states
 * are those of precondition.ts, in which a contracting W is not far from a multiple of I.
 */
import { cholesky, congruence, rangeAndNull, symmetricEigen, whiten } from "../num/dense.js";
import { type ConstantProblem, conditionMatrix } from "./constantProblem.js";
import { minimise } from "./logDetBarrier.js";
import { gram, identity, metricBlocks } from "./metricBlocks.js";

/** Rates are looked for between these multiples of the plant's own scale; above, every useful tube is bound by authority. */
const [SLOWEST, FASTEST] = [5e-4, 4];
/** How strictly a W has to contract, as a share of the rate, to count. */
const STRICTLY = 1e-4;
/** Relative gap at which a contracting W is taken. */
const LOOSE = 0.3;
/** The fastest rate is known to this share. */
const RESOLUTION = 0.03;

/** Null bases of the samples, made once. */
export interface Contraction {
  /** A W that contracts strictly at the rate, or null. */
  at(rate: number): Float64Array | null;
  /** Worst rate of a metric over samples and corners; infinite when every state is actuated. */
  rateOf(W: Float64Array): number;
  /** The fastest rate found, up to `RESOLUTION` or to the top of the range, with its W; null when none in the range. */
  fastest(): { readonly rate: number; readonly W: Float64Array } | null;
  /** Slowest rate looked at, 1/s. */
  readonly slowest: number;
}

export function contraction({ n, m, samples }: ConstantProblem): Contraction {
  const k = n - m;
  const bases = samples.map(({ B }) => {
    const P = new Float64Array(n * k);
    rangeAndNull(B, new Float64Array(n * m), P, n, m, new Float64Array(n * n + n * m));
    return P;
  });
  const zero = new Float64Array(n * n);
  const work = new Float64Array(n * k);
  const scale = Math.max(...samples.flatMap(({ B, jacobians }) => [B, ...jacobians].map((M) => Math.hypot(...M))));

  /** Largest excess of P^T (K W + W K^T + 2 rate W) P, over P^T W P when `relative`. */
  const excess = (W: Float64Array, rate: number, relative: boolean): number => {
    let most = Number.NEGATIVE_INFINITY;
    const C = new Float64Array(k * k);
    const L = new Float64Array(k * k);
    const values = new Float64Array(k);
    samples.forEach(({ jacobians }, s) => {
      for (const K of jacobians) {
        congruence(conditionMatrix(K, W, zero, 0, rate, n), bases[s]!, C, n, k, work);
        if (relative) {
          const Wp = new Float64Array(k * k);
          congruence(W, bases[s]!, Wp, n, k, work);
          if (!cholesky(Wp, L, k)) most = Number.POSITIVE_INFINITY;
          else whiten(L, C, k, values);
        }
        symmetricEigen(C, k, values, null);
        most = Math.max(most, -Math.min(...values));
      }
    });
    return most;
  };

  const at = (rate: number): Float64Array | null => {
    if (k === 0) return identity(n);
    const blocks = metricBlocks(n, 1);
    const program = [
      ...samples.flatMap(({ jacobians }, s) => jacobians.map((K) => blocks.projected(K, rate, bases[s]!, k, 0))),
      blocks.positive(),
      blocks.below(1),
    ];
    const W = identity(n).map((value) => value / 2);
    const x = new Float64Array(blocks.size);
    blocks.write(W, x);
    x[0] = rate + 2 * Math.max(0, excess(W, rate, false));
    const cost = new Float64Array(blocks.size);
    cost[0] = 1 / rate;
    // centred well inside where the rate is possible: the later programs start from here
    const result = minimise(
      cost,
      program,
      x,
      (value, gap) => gap !== null && (gap < LOOSE * Math.abs(value) || value - gap > -STRICTLY),
    );
    return result.value < -STRICTLY ? blocks.read(result.x) : null;
  };

  const rateOf = (W: Float64Array): number => (k === 0 ? Number.POSITIVE_INFINITY : -excess(W, 0, true) / 2);

  const fastest = (): { rate: number; W: Float64Array } | null => {
    const slowest = SLOWEST * scale;
    const first = at(slowest);
    if (first === null) return null;
    let high = FASTEST * scale;
    let best = { rate: Math.min(rateOf(first), high), W: first };
    while (high > best.rate * (1 + RESOLUTION)) {
      const middle = Math.sqrt(best.rate * high);
      const W = at(middle);
      if (W === null) high = middle;
      else best = { rate: Math.min(rateOf(W), high), W };
    }
    return best;
  };

  return { at, rateOf, fastest, slowest: SLOWEST * scale };
}

/** The least gain, up to one per cent above, that makes a contracting W hold at the rate, by doubling and halving. */
export function gainFor({ n, m, samples }: ConstantProblem, W: Float64Array, rate: number): number {
  const L = new Float64Array(n * n);
  const grams = samples.map(({ B }) => gram(B, n, m));
  const holds = (rho: number): boolean =>
    samples.every(({ jacobians }, s) =>
      jacobians.every((K) => cholesky(conditionMatrix(K, W, grams[s]!, rho, rate, n), L, n)),
    );
  if (holds(0)) return 0;
  let high = Math.hypot(...W) / Math.hypot(...samples[0]!.B) ** 2;
  for (let i = 0; !holds(high); i++) {
    if (i === 200) return Number.POSITIVE_INFINITY;
    high *= 2;
  }
  let low = 0;
  while (high - low > 0.01 * high) {
    const middle = (low + high) / 2;
    if (holds(middle)) high = middle;
    else low = middle;
  }
  return high;
}
