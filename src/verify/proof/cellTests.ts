/**
 * The quantities of a certificate on the cell (or point) that an evaluator was run for, each as a one-sided test or
 * bound; see condition.ts for what they are.
 */
import type { BodyFrame } from "../../model/controlAffine.js";
import { symmetricEigen } from "../../num/dense.js";
import { sqrtUp, stepDown, stepUp } from "../../num/directed.js";
import { type Node, type TaylorEvaluator, type TaylorGraph, ZERO } from "../../num/taylorGraph.js";
import { GROW } from "../../num/taylorModel.js";
import { inputCorners } from "../corners.js";
import type { ProofClaims } from "./claims.js";
import type { ConditionNodes } from "./conditionNodes.js";
import { type ColumnNodes, columnNodes, inverseForms } from "./inverseForms.js";
import { type NegativityResult, negativityTest } from "./negativity.js";
import { type SpreadBound, spreadBound } from "./spreadBound.js";

/** Nodes of a certificate with the room that the tests need. */
export interface CertificateNodes {
  readonly condition: ConditionNodes;
  readonly frame: BodyFrame | null;
  readonly isPositive: boolean;
  /** One a leftover channel. */
  readonly disturbances: readonly ColumnNodes[];
  /** One an input. */
  readonly inputs: readonly ColumnNodes[];
  /** m x m: B^T W^{-1} B less its remainder. */
  readonly gain: readonly Node[];
  readonly forms: readonly Node[];
  readonly spare: Node;
}

export function certificateNodes(
  graph: TaylorGraph,
  condition: ConditionNodes,
  model: { readonly B: readonly Node[]; readonly G: readonly Node[]; readonly p: number },
  frame: BodyFrame | null,
  isPositive: boolean,
): CertificateNodes {
  const { n, m } = condition;
  const columns = (matrix: readonly Node[], count: number): ColumnNodes[] =>
    Array.from({ length: count }, (_, j) =>
      columnNodes(
        graph,
        Array.from({ length: n }, (_, i) => matrix[i * count + j]!),
      ),
    );
  return {
    condition,
    frame,
    isPositive,
    disturbances: columns(model.G, model.p),
    inputs: columns(model.B, m),
    gain: graph.scratch(m * m),
    forms: graph.scratch(model.p),
    spare: graph.scratch(1)[0]!,
  };
}

export interface CellTests {
  /** B has full column rank and W is positive definite, all over the cell. */
  isRegular(): boolean;
  /** The condition at a rate, at every input corner; influence is added to. */
  rate(lambda: number, influence: Float64Array | null): NegativityResult;
  /** Upper bound; also prepares `authority`. Infinity when W varies too much. */
  sigma(wbar: readonly number[]): number;
  readonly spreads: readonly SpreadBound[];
  /** Upper bound of sqrt(eigmax(B^T W^{-1} B)). */
  inputGain(): number;
  /** F + 2 lambda W - rho B B^T <= 0 at every input corner. */
  authority(lambda: number, rho: number, influence: Float64Array | null): NegativityResult;
  /** Input corners of the condition on null(B^T), of which inputs that do not enter are left out. */
  readonly rateCorners: readonly (readonly number[])[];
  readonly authorityCorners: readonly (readonly number[])[];
}

export function cellTests(evaluator: TaylorEvaluator, nodes: CertificateNodes, claims: ProofClaims): CellTests {
  const { kernel, M } = evaluator;
  const { condition, frame, isPositive, disturbances, inputs, gain, forms, spare } = nodes;
  const { n, m, F, W, BB, C, WN, pivots } = condition;
  const k = n - m;
  const onNull = negativityTest(evaluator, [...C, WN], k);
  const onAll = negativityTest(evaluator, [...F, W, BB], n);
  const ofW = negativityTest(evaluator, [W], n);
  const ofGain = negativityTest(evaluator, [gain], m);
  const inverse = inverseForms(evaluator, W, n);
  const rateCorners = cornersOf(C.slice(1));
  const authorityCorners = cornersOf(F.slice(1));
  const rateWeights = new Float64Array(m + 2);
  const authorityWeights = new Float64Array(m + 3);

  const isRegular = (): boolean =>
    pivots.every((node) => kernel.lower(M, evaluator.at(node)) > 0 || kernel.upper(M, evaluator.at(node)) < 0) &&
    (isPositive || ofW.test([-1], 0, null).holds);

  const overCorners = (
    test: typeof onNull,
    corners: readonly (readonly number[])[],
    weights: Float64Array,
    influence: Float64Array | null,
  ): NegativityResult => {
    let load = 0;
    for (const corner of corners) {
      weights.set(corner, 1);
      influence?.fill(0);
      const result = test.test(weights, 0, influence);
      if (!result.holds) return result;
      load = Math.max(load, result.load);
    }
    return { holds: true, load, corner: null };
  };

  const rate: CellTests["rate"] = (lambda, influence) => {
    rateWeights[0] = 1;
    rateWeights[m + 1] = 2 * lambda;
    return overCorners(onNull, rateCorners, rateWeights, influence);
  };

  const authority: CellTests["authority"] = (lambda, rho, influence) => {
    authorityWeights[0] = 1;
    authorityWeights[m + 1] = 2 * lambda;
    authorityWeights[m + 2] = -rho;
    return overCorners(onAll, authorityCorners, authorityWeights, influence);
  };

  /** sqrt(q) <= w^2 / (4 v) + v q for any v > 0, w = 1 scaled by wbar: tight where v = wbar / (2 sqrt(q)). */
  const sigma = (wbar: readonly number[]): number => {
    if (!inverse.prepare()) return Number.POSITIVE_INFINITY;
    let constants = 0;
    const linear = disturbances.flatMap((column, c) => {
      const w = wbar[c]!;
      if (w === 0) return [];
      const out = evaluator.at(forms[c]!);
      const remainder = inverse.solve(column);
      inverse.form(column, column, forms[c]!);
      const q = M[out]!;
      const weight = w / (2 * Math.sqrt(Math.max(q, 1e-200)));
      constants += stepUp(stepUp(w * w) / (4 * weight)) * GROW + weight * remainder;
      return [{ weight, of: out }];
    });
    kernel.sum(M, { constant: 0, linear, products: [] }, evaluator.at(spare));
    return stepUp(kernel.upper(M, evaluator.at(spare)) + constants * GROW);
  };

  const inputGain = (): number => {
    if (m === 0) return 0;
    if (!inverse.prepare()) return Number.POSITIVE_INFINITY;
    let remainder = 0;
    for (const column of inputs) remainder += inverse.solve(column);
    let most = 0;
    let centre = 0;
    for (let a = 0; a < m; a++) {
      let row = 0;
      for (let b = 0; b < m; b++) {
        const out = evaluator.at(gain[a * m + b]!);
        // the sum Y^T R + ... is symmetric as a whole; each half of an entry serves both
        inverse.form(inputs[Math.min(a, b)]!, inputs[Math.max(a, b)]!, gain[a * m + b]!);
        row += Math.max(kernel.upper(M, out), -kernel.lower(M, out));
        if (a === b) centre = Math.max(centre, M[out]!);
      }
      most = Math.max(most, row);
      if (Number.isNaN(row)) return Number.POSITIVE_INFINITY;
    }
    const bound = m === 1 ? most : leastUpperBound(centre, most);
    return sqrtUp(stepUp(bound + remainder * GROW));
  };

  /** Bisection between a lower value and Gershgorin's bound, each step shown by `G - theta I <= 0`. */
  const leastUpperBound = (from: number, gershgorin: number): number => {
    let low = from;
    let high = gershgorin;
    for (let i = 0; i < 7 && high > low; i++) {
      const middle = (low + high) / 2;
      if (ofGain.test([1], -middle, null).holds) high = middle;
      else low = middle;
    }
    return high;
  };

  return {
    isRegular,
    rate,
    sigma,
    spreads: claims.spreads.map(({ direction }) => spreadBound(evaluator, W, n, frame, direction, spare)),
    inputGain,
    authority,
    rateCorners,
    authorityCorners,
  };
}

/** Corners of the inputs whose matrices are not all zero; the others at 0. */
function cornersOf(matrices: readonly (readonly Node[])[]): number[][] {
  const entering = matrices.flatMap((nodes, j) => (nodes.some((node) => node !== ZERO) ? [j] : []));
  return inputCorners(entering.length).map((corner) => {
    const v = new Array<number>(matrices.length).fill(0);
    entering.forEach((j, e) => {
      v[j] = corner[e]!;
    });
    return v;
  });
}

/** y^T (sum of weights times matrices) y > 0 for certain, at the point the evaluator was run for. */
export function isCertainlyPositive(
  evaluator: TaylorEvaluator,
  matrices: readonly (readonly Node[])[],
  weights: ArrayLike<number>,
  size: number,
): boolean {
  const { M, kernel } = evaluator;
  const value = new Float64Array(size * size);
  const error = new Float64Array(size * size);
  for (let e = 0; e < size * size; e++) {
    matrices.forEach((nodes, f) => {
      const node = nodes[e]!;
      const w = weights[f]!;
      if (node === ZERO || w === 0) return;
      const part = w * M[evaluator.at(node)]!;
      value[e]! += part;
      // 2^-48 of the parts covers the rounding of sums of this few terms
      error[e]! += Math.abs(w) * M[evaluator.at(node) + kernel.size - 1]! + 2 ** -48 * Math.abs(part);
    });
  }
  const eigenvalues = new Float64Array(size);
  const vectors = new Float64Array(size * size);
  symmetricEigen(value.slice(), size, eigenvalues, vectors);
  const top = eigenvalues.indexOf(Math.max(...eigenvalues));
  if (top < 0) return false;
  let sum = 0;
  let doubt = 0;
  for (let i = 0; i < size; i++) {
    for (let j = 0; j < size; j++) {
      const yy = vectors[i * size + top]! * vectors[j * size + top]!;
      sum += yy * value[i * size + j]!;
      doubt += Math.abs(yy) * (error[i * size + j]! + 2 ** -46 * Math.abs(value[i * size + j]!));
    }
  }
  return stepDown(sum) > doubt * GROW;
}
