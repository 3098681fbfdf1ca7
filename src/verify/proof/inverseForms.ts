/**
 * Upper bounds of g^T W^{-1} g over a cell without inverting W: for any y, with r = g - W y,
 *   g^T W^{-1} g = g^T y + y^T r + r^T W^{-1} r,   and   G^T W^{-1} G = G^T Y + Y^T R + R^T W^{-1} R  for columns.
 * y is affine in the cell's coordinates (solved in float64 at the centre and along each axis; its rounding does not
 * matter, r takes it up), so r is of second order and the last term, bounded by |T r|^2 / lambda_min(T W T^T) with T a
 * float64 inverse Cholesky factor of W at the centre, of fourth. lambda_min by Gershgorin.
 */
import { cholesky, solveLower, solveLowerTransposed } from "../../num/dense.js";
import { stepDown, U } from "../../num/directed.js";
import type { Node, TaylorEvaluator, TaylorGraph } from "../../num/taylorGraph.js";
import { ZERO } from "../../num/taylorGraph.js";
import { GROW, TINY } from "../../num/taylorModel.js";

export interface ColumnNodes {
  /** n: the column g. */
  readonly g: readonly Node[];
  readonly y: readonly Node[];
  readonly r: readonly Node[];
}

/** Room for one column's y and r; before the graph's evaluators are made. */
export function columnNodes(graph: TaylorGraph, g: readonly Node[]): ColumnNodes {
  return { g, y: graph.scratch(g.length), r: graph.scratch(g.length) };
}

export interface InverseForms {
  /** After each run of the evaluator; false when W is not shown positive definite by its spread over the cell. */
  prepare(): boolean;
  /** Fills y and r of a column; returns an upper bound of r^T W^{-1} r. */
  solve(column: ColumnNodes): number;
  /** g_a^T y_b + y_a^T r_b into a node of its own. */
  form(a: ColumnNodes, b: ColumnNodes, out: Node): void;
}

export function inverseForms(evaluator: TaylorEvaluator, W: readonly Node[], n: number): InverseForms {
  const { kernel, M } = evaluator;
  const { d, size } = kernel;
  const count = size - 1;
  const offset = (node: Node): number => (node === ZERO ? -1 : evaluator.at(node));
  const at = Int32Array.from(W, offset);
  const centre = new Float64Array(n * n);
  const factor = new Float64Array(n * n);
  const T = new Float64Array(n * n);
  const column = new Float64Array(n);
  const product = new Float64Array(n);
  const models = new Float64Array(n * size);
  let leastEigenvalue = 0;

  const coefficient = (o: number, c: number): number => (o < 0 ? 0 : M[o + c]!);

  const prepare = (): boolean => {
    for (let i = 0; i < n * n; i++) centre[i] = coefficient(at[i]!, 0);
    if (!cholesky(centre, factor, n)) return false;
    for (let j = 0; j < n; j++) {
      column.fill(0);
      column[j] = 1;
      solveLower(factor, column, n);
      for (let i = 0; i < n; i++) T[i * n + j] = column[i]!;
    }
    leastEigenvalue = 1 - spreadFromIdentity();
    return leastEigenvalue > 0;
  };

  /** Upper bound of the row sums of |T W T^T - I| over the cell. */
  const spreadFromIdentity = (): number => {
    let worst = 0;
    const row = new Float64Array(n);
    for (let a = 0; a < n; a++) {
      row.fill(0);
      let slack = 0;
      for (let c = 0; c < size; c++) {
        // T_a W_c: for the remainder all sizes
        for (let j = 0; j < n; j++) {
          let sum = 0;
          for (let l = 0; l <= a; l++) {
            const w = coefficient(at[l * n + j]!, c);
            const t = T[a * n + l]!;
            sum += c === count ? Math.abs(t) * w : t * w;
            slack += Math.abs(t * w);
          }
          product[j] = sum;
        }
        for (let b = 0; b < n; b++) {
          let sum = c === 0 && a === b ? -1 : 0;
          let sizes = 1;
          for (let l = 0; l <= b; l++) {
            const t = T[b * n + l]!;
            sum += c === count ? Math.abs(t) * product[l]! : t * product[l]!;
            sizes += Math.abs(t * product[l]!);
          }
          row[b]! += Math.abs(sum) + (2 * n + 12) * U * sizes;
        }
      }
      // rounding of T_a W: (n + 2) u slack in each entry, carried on by |T|
      let reach = 0;
      for (let b = 0; b < n; b++) for (let l = 0; l <= b; l++) reach += Math.abs(T[b * n + l]!);
      let total = (n + 12) * U * slack * reach;
      for (let b = 0; b < n; b++) total += row[b]!;
      if (!(total <= worst)) worst = total;
    }
    return worst * GROW + TINY;
  };

  const solve = ({ g, y, r }: ColumnNodes): number => {
    const gAt = g.map(offset);
    for (const node of y) M.fill(0, evaluator.at(node), evaluator.at(node) + size);
    for (let c = 0; c <= d; c++) {
      for (let i = 0; i < n; i++) {
        let right = coefficient(gAt[i]!, c);
        if (c > 0) for (let j = 0; j < n; j++) right -= coefficient(at[i * n + j]!, c) * M[evaluator.at(y[j]!)]!;
        column[i] = right;
      }
      solveLower(factor, column, n);
      solveLowerTransposed(factor, column, n);
      for (let i = 0; i < n; i++) M[evaluator.at(y[i]!) + c] = column[i]!;
    }
    for (let i = 0; i < n; i++) {
      const products = y.flatMap((node, j) =>
        at[i * n + j]! < 0 ? [] : [{ weight: -1, left: at[i * n + j]!, right: evaluator.at(node) }],
      );
      const linear = gAt[i]! < 0 ? [] : [{ weight: 1, of: gAt[i]! }];
      kernel.sum(M, { constant: 0, linear, products }, evaluator.at(r[i]!));
    }
    return (residualNorm(r) / stepDown(leastEigenvalue)) * GROW;
  };

  /** Upper bound of |T r|^2 over the cell. */
  const residualNorm = (r: readonly Node[]): number => {
    for (let j = 0; j < n; j++) models.set(M.subarray(evaluator.at(r[j]!), evaluator.at(r[j]!) + size), j * size);
    let total = 0;
    for (let a = 0; a < n; a++) {
      let reach = 0;
      for (let c = 0; c < size; c++) {
        let sum = 0;
        let sizes = 0;
        for (let l = 0; l <= a; l++) {
          const part = T[a * n + l]! * models[l * size + c]!;
          sum += part;
          sizes += Math.abs(part);
        }
        reach += c === count ? sizes : Math.abs(sum) + (n + 12) * U * sizes;
      }
      total += reach * reach;
    }
    return total * GROW + TINY;
  };

  const form = (a: ColumnNodes, b: ColumnNodes, out: Node): void => {
    const products: { weight: number; left: number; right: number }[] = [];
    for (let i = 0; i < n; i++) {
      if (a.g[i] !== ZERO) products.push({ weight: 1, left: evaluator.at(a.g[i]!), right: evaluator.at(b.y[i]!) });
      products.push({ weight: 1, left: evaluator.at(a.y[i]!), right: evaluator.at(b.r[i]!) });
    }
    kernel.sum(M, { constant: 0, linear: [], products }, evaluator.at(out));
  };

  return { prepare, solve, form };
}
