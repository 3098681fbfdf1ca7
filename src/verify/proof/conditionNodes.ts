/**
 * The contraction condition (condition.ts) as nodes of a Taylor graph: F(v) = F_0 + sum_j v_j F_j without the rate term,
 * W, and both on null(B^T). The basis of null(B^T) is not orthonormal but smooth: with m pivot rows of B, B_2, and the
 * others, B_1, and X = B_1 B_2^{-1}, N = [I; -X^T] in the order of the rows. A congruence keeps the sign. The pivots of
 * the elimination must not touch zero on a cell: that shows full column rank of B there.
 */
import type { ModelNodes } from "../../model/intervalModel.js";
import type { MetricNodes } from "../../nets/intervalMetric.js";
import { type Node, type TaylorGraph, type Term, ZERO } from "../../num/taylorGraph.js";

export interface ConditionNodes {
  readonly n: number;
  readonly m: number;
  /** 1 + m matrices n x n, symmetric. */
  readonly F: readonly (readonly Node[])[];
  readonly W: readonly Node[];
  /** B B^T, n x n. */
  readonly BB: readonly Node[];
  /** 1 + m matrices k x k, k = n - m: N^T F_j N. */
  readonly C: readonly (readonly Node[])[];
  /** N^T W N. */
  readonly WN: readonly Node[];
  readonly pivots: readonly Node[];
}

export function conditionNodes(graph: TaylorGraph, model: ModelNodes, metric: MetricNodes): ConditionNodes {
  const { n, m, B } = model;
  const { W } = metric;
  const F = Array.from({ length: m + 1 }, (_, j) => {
    const direction = j === 0 ? model.f : Array.from({ length: n }, (_, i) => B[i * m + j - 1]!);
    return symmetric(n, (i, l) => graph.sum(conditionTerms(model, metric, direction, model.A[j]!, i, l)));
  });
  const { rows, pivotRows, X, pivots } = nullBasis(graph, B, n, m);
  const k = n - m;
  const project = (S: readonly Node[]): Node[] => {
    // S N, then N^T (S N)
    const right = Array.from({ length: n * k }, (_, at) => {
      const [i, b] = [Math.floor(at / k), at % k];
      return graph.sum([
        { weight: 1, left: S[i * n + rows[b]!]! },
        ...pivotRows.map((r, s): Term => ({ weight: -1, left: S[i * n + r]!, right: X[b * m + s]! })),
      ]);
    });
    return symmetric(k, (a, b) =>
      graph.sum([
        { weight: 1, left: right[rows[a]! * k + b]! },
        ...pivotRows.map((r, s): Term => ({ weight: -1, left: X[a * m + s]!, right: right[r * k + b]! })),
      ]),
    );
  };
  return {
    n,
    m,
    F,
    W,
    BB: symmetric(n, (i, l) =>
      graph.sum(Array.from({ length: m }, (_, j): Term => ({ weight: 1, left: B[i * m + j]!, right: B[l * m + j]! }))),
    ),
    C: F.map(project),
    WN: project(W),
    pivots,
  };
}

/** Entry (i, l) of -d W along the direction + A W + W A^T - psidot (S W + W S^T). */
function conditionTerms(
  model: ModelNodes,
  metric: MetricNodes,
  direction: readonly Node[],
  A: readonly Node[],
  i: number,
  l: number,
): Term[] {
  const { n, rotation } = model;
  const { W, slopes } = metric;
  const terms: Term[] = slopes.map(({ state, dW }) => ({
    weight: -1,
    left: direction[state]!,
    right: dW[i * n + l]!,
  }));
  for (let k = 0; k < n; k++) {
    terms.push({ weight: 1, left: A[i * n + k]!, right: W[k * n + l]! });
    terms.push({ weight: 1, left: A[l * n + k]!, right: W[k * n + i]! });
  }
  if (rotation !== null) {
    const [a, b] = rotation.position;
    const turn = direction[rotation.heading]!;
    // -psidot (S W)_il: S W has rows -W_b at a and W_a at b
    for (const [row, column] of [
      [i, l],
      [l, i],
    ] as const) {
      if (row === a) terms.push({ weight: rotation.headingHalf, left: turn, right: W[b * n + column]! });
      if (row === b) terms.push({ weight: -rotation.headingHalf, left: turn, right: W[a * n + column]! });
    }
  }
  return terms;
}

function symmetric(size: number, entry: (i: number, j: number) => Node): Node[] {
  const out = new Array<Node>(size * size).fill(ZERO);
  for (let i = 0; i < size; i++) for (let j = 0; j <= i; j++) out[i * size + j] = out[j * size + i] = entry(i, j);
  return out;
}

/**
 * Gauss-Jordan by columns: B with pivot rows turned to I leaves X in the other rows. Pivot rows are chosen at the box
 * centre, the largest entry of the column first.
 */
function nullBasis(graph: TaylorGraph, B: readonly Node[], n: number, m: number) {
  const reduced = [...B];
  const pivotRows: number[] = [];
  const pivots: Node[] = [];
  for (let s = 0; s < m; s++) {
    const at = graph.evaluator("points");
    at.run(new Float64Array(graph.variables), new Float64Array(graph.variables));
    const size = (i: number): number => {
      const node = reduced[i * m + s]!;
      return node === ZERO || pivotRows.includes(i) ? 0 : Math.abs(at.M[at.at(node)]!);
    };
    const pivotRow = Array.from({ length: n }, (_, i) => i).reduce((best, i) => (size(i) > size(best) ? i : best), 0);
    const pivot = reduced[pivotRow * m + s]!;
    if (!(size(pivotRow) > 0))
      throw new Error(
        "B has not full column rank at the middle of the envelope: two inputs act alike there, or one not at all",
      );
    pivotRows.push(pivotRow);
    pivots.push(pivot);
    for (let i = 0; i < n; i++) {
      if (i !== pivotRow) reduced[i * m + s] = graph.quotient(reduced[i * m + s]!, pivot);
    }
    for (let j = 0; j < m; j++) {
      const factor = reduced[pivotRow * m + j]!;
      if (j === s || factor === ZERO) continue;
      for (let i = 0; i < n; i++) {
        if (i === pivotRow) continue;
        reduced[i * m + j] = graph.sum([
          { weight: 1, left: reduced[i * m + j]! },
          { weight: -1, left: factor, right: reduced[i * m + s]! },
        ]);
      }
      reduced[pivotRow * m + j] = ZERO;
    }
  }
  const rows = Array.from({ length: n }, (_, i) => i).filter((i) => !pivotRows.includes(i));
  return { rows, pivotRows, pivots, X: rows.flatMap((i) => reduced.slice(i * m, (i + 1) * m)) };
}
