/**
 * Decides one cell of the reduced box: proved with bounds of its own, or not yet, with the coordinate to split; and
 * decides single points. Built once a worker; a cell's result depends on nothing but
 * the cell.
 */
import { modelNodes } from "../../model/intervalModel.js";
import { type MetricField, metricField } from "../../nets/intervalMetric.js";
import { argMax, symmetricEigen } from "../../num/dense.js";
import { sqrtDown, stepDown, stepUp } from "../../num/directed.js";
import { type Node, type TaylorEvaluator, taylorGraph, ZERO } from "../../num/taylorGraph.js";
import { GROW } from "../../num/taylorModel.js";
import { activeStates } from "../../plant/scaling.js";
import { cellTests, certificateNodes, isCertainlyPositive } from "./cellTests.js";
import type { CellBounds, ClaimName, ProofClaims, ProofSubject } from "./claims.js";
import { conditionNodes } from "./conditionNodes.js";
import { rotationFault } from "./rotationProof.js";

export type CellResult =
  | { readonly status: "proved"; readonly bounds: CellBounds }
  /** A claim certainly fails at a point of the cell. */
  | {
      readonly status: "refuted";
      readonly claim: ClaimName;
      readonly at: Float64Array;
      readonly split: number | null;
    }
  | {
      readonly status: "undecided";
      /** The claim that stopped the cell. */
      readonly claim: ClaimName;
      /** Larger is worse: 1 just fails, Infinity when the centre fails. */
      readonly load: number;
      /** Index of the active coordinate to halve; null when no coordinate matters. */
      readonly split: number | null;
    };

export interface CellProver {
  /** Number of active coordinates. */
  readonly dimension: number;
  /** Indices of the active coordinates that anything depends on. */
  readonly used: readonly number[];
  /** lower, upper: ends of each active coordinate, in [-1, 1]. */
  examine(lower: Float64Array, upper: Float64Array): CellResult;
  /** A rate that holds on the cell, be it below the claim; -Infinity when none was found. */
  rateBelow(lower: Float64Array, upper: Float64Array): number;
  /** The first claim that certainly fails at a point, or null. */
  refute(at: Float64Array): ClaimName | null;
  /** True when bounds from elsewhere (a table) hold on the cell and meet the claims. */
  confirm(lower: Float64Array, upper: Float64Array, bounds: CellBounds): boolean;
}

/** Halvings between the claim and what fails, when a proved cell looks for bounds of its own. */
const TIGHTEN = 3;

export function cellProver(subject: ProofSubject, claims: ProofClaims): CellProver {
  const { plant, residual } = subject;
  const turnFault = rotationFault(plant);
  if (turnFault !== null)
    throw new Error(`the declared rotation is not shown by the formulas, so no proof may use it: ${turnFault}`);
  const graph = taylorGraph(activeStates(plant).length);
  const model = modelNodes(graph, plant, residual);
  const field: MetricField = typeof subject.metric === "function" ? subject.metric : metricField(subject.metric);
  const metric = field(graph, model.z);
  if (metric.n !== model.n)
    throw new Error(`the metric is for ${metric.n} states, the plant has ${model.n}; give the plant's own metric`);
  const hidden = metric.slopes.find(({ state }) => !model.active.includes(state));
  if (hidden !== undefined)
    throw new Error(
      `the metric reads '${plant.states[hidden.state]!.name}', which the declared symmetry takes out of the box; no proof would cover it`,
    );
  checkClaims(claims, model.p);
  const condition = conditionNodes(graph, model, metric);
  const nodes = certificateNodes(graph, condition, model, model.rotation, metric.isPositive);
  const cells = graph.evaluator("cells");
  const points = graph.evaluator("points");
  const onCell = cellTests(cells, nodes, claims);
  const atPoint = cellTests(points, nodes, claims);
  const dimension = graph.variables;
  const centre = new Float64Array(dimension);
  const radius = new Float64Array(dimension);
  const { n, m } = condition;

  const runCell = (lower: Float64Array, upper: Float64Array): void => {
    for (let i = 0; i < dimension; i++) {
      const middle = lower[i]! / 2 + upper[i]! / 2;
      centre[i] = middle;
      radius[i] = Math.max(0, stepUp(upper[i]! - middle), stepUp(middle - lower[i]!));
    }
    cells.run(centre, radius);
  };

  const examine: CellProver["examine"] = (lower, upper) => {
    runCell(lower, upper);
    const influence = new Float64Array(cells.used.length);
    const undecided = (claim: ClaimName, load: number, corner: readonly number[] | null): CellResult => {
      const split = splitBy(influence, lower, upper);
      const at = corner === null ? centre.slice() : cornerPoint(corner, lower, upper);
      // a rate whose centre holds and whose corners hold as an affine function has no likely counterexample
      const isWorthTrying =
        corner !== null || load === Number.POSITIVE_INFINITY || claim === "spread" || claim === "push";
      const refuted = isWorthTrying ? refute(at) : null;
      if (refuted !== null) return { status: "refuted", claim: refuted, at, split };
      return { status: "undecided", claim, load: Number.isNaN(load) ? Number.POSITIVE_INFINITY : load, split };
    };
    if (!onCell.isRegular()) return undecided("definite", Number.POSITIVE_INFINITY, null);
    const rate = onCell.rate(claims.rate, influence);
    if (!rate.holds) return undecided("rate", rate.load, rate.corner);
    const spreads = onCell.spreads.map((spread) => spread.upper());
    const wide = spreads.findIndex((value, s) => !(value <= claims.spreads[s]!.most));
    if (wide >= 0) {
      addModelInfluence(cells, condition.W, influence);
      return undecided("spread", spreads[wide]! / claims.spreads[wide]!.most, null);
    }
    const pushes = claims.pushes.map(({ wbar }) => onCell.sigma(wbar));
    const hard = pushes.findIndex((value, c) => !(value <= claims.pushes[c]!.most));
    if (hard >= 0) {
      addModelInfluence(cells, condition.W, influence);
      return undecided("push", pushes[hard]! / claims.pushes[hard]!.most, null);
    }
    let authority = 0;
    if (claims.authority !== null && m > 0) {
      const gain = onCell.inputGain();
      const rho = stepDown(claims.authority.most / stepUp(gain));
      const result = onCell.authority(claims.authority.rate, rho, influence);
      if (!(rho > 0) || !result.holds) return undecided("authority", result.load, result.corner);
      // a little more than gain * rho, so that dividing by the gain again gives no less than rho
      authority = Math.min(claims.authority.most, gain * leastRho(claims.authority.rate, rho) * GROW);
    }
    return { status: "proved", bounds: { rate: largestRate(), pushes, spreads, authority } };
  };

  /** A rate of the cell's own, at least the claimed one. */
  const largestRate = (): number => {
    if (n === m) return Number.MAX_VALUE;
    let proved = claims.rate;
    let step = Math.max(Math.abs(proved), 1e-3) / 16;
    let failed = proved + step;
    for (let doubling = 0; doubling < 12 && onCell.rate(failed, null).holds; doubling++) {
      proved = failed;
      step *= 2;
      failed = proved + step;
    }
    for (let i = 0; i < TIGHTEN; i++) {
      const middle = (proved + failed) / 2;
      if (onCell.rate(middle, null).holds) proved = middle;
      else failed = middle;
    }
    return proved;
  };

  const rateBelow: CellProver["rateBelow"] = (lower, upper) => {
    if (n === m) return Number.MAX_VALUE;
    runCell(lower, upper);
    if (!onCell.isRegular()) return Number.NEGATIVE_INFINITY;
    let step = Math.max(Math.abs(claims.rate), 1e-3) / 16;
    let tried = claims.rate;
    for (let doubling = 0; doubling < 16; doubling++) {
      if (onCell.rate(tried, null).holds) return tried;
      tried -= step;
      step *= 2;
    }
    return Number.NEGATIVE_INFINITY;
  };

  const leastRho = (rate: number, claimed: number): number => {
    let proved = claimed;
    let failed = 0;
    for (let i = 0; i < TIGHTEN; i++) {
      const middle = (proved + failed) / 2;
      if (onCell.authority(rate, middle, null).holds) proved = middle;
      else failed = middle;
    }
    return proved;
  };

  const splitBy = (influence: Float64Array, lower: Float64Array, upper: Float64Array): number | null => {
    const used = cells.used;
    if (used.length === 0) return null;
    const size = (i: number): number => upper[used[i]!]! - lower[used[i]!]!;
    // where the influence says nothing (a centre that fails, overflow), the longest edge
    const isTelling = influence.every(Number.isFinite) && influence.some((value) => value > 0);
    let best = 0;
    for (let i = 1; i < used.length; i++) {
      const better = isTelling ? influence[i]! > influence[best]! : size(i) > size(best);
      if (better) best = i;
    }
    return used[best]!;
  };

  const cornerPoint = (corner: readonly number[], lower: Float64Array, upper: Float64Array): Float64Array => {
    const at = centre.slice();
    cells.used.forEach((index, i) => {
      at[index] = corner[i]! > 0 ? upper[index]! : lower[index]!;
    });
    return at;
  };

  const refute: CellProver["refute"] = (at) => {
    points.run(at, radius);
    const { C, WN, W, F, BB } = condition;
    if (!metric.isPositive && isCertainlyPositive(points, [W], [-1], n)) return "definite";
    const fails = (
      matrices: readonly (readonly Node[])[],
      corners: readonly (readonly number[])[],
      rest: number[],
      size: number,
    ) => corners.some((corner) => isCertainlyPositive(points, matrices, [1, ...corner, ...rest], size));
    if (n > m && fails([...C, WN], atPoint.rateCorners, [2 * claims.rate], n - m)) return "rate";
    if (atPoint.spreads.some((spread, s) => spread.lower() > claims.spreads[s]!.most)) return "spread";
    if (claims.pushes.some(({ wbar, most }) => sigmaLower(wbar) > most)) return "push";
    if (claims.authority !== null && m > 0) {
      const gain = gainLower();
      const rho = stepUp(claims.authority.most / gain);
      const weights = [2 * claims.authority.rate, -rho];
      if (Number.isFinite(rho) && fails([...F, W, BB], atPoint.authorityCorners, weights, n)) return "authority";
    }
    return null;
  };

  /** After `sigma` at a point: its forms less their errors, the positive remainder dropped. */
  const sigmaLower = (wbar: readonly number[]): number => {
    if (!Number.isFinite(atPoint.sigma(wbar))) return 0;
    let total = 0;
    nodes.forms.forEach((node, c) => {
      if (wbar[c] !== 0) total += wbar[c]! * sqrtDown(Math.max(0, points.kernel.lower(points.M, points.at(node))));
    });
    return total / GROW;
  };

  /** A lower bound of sqrt(eigmax(B^T W^{-1} B)): v^T G v / v^T v at an approximate eigenvector v, remainder dropped. */
  const gainLower = (): number => {
    if (!Number.isFinite(atPoint.inputGain())) return 0;
    const { M, kernel } = points;
    const offsets = nodes.gain.map((node) => points.at(node));
    const vectors = new Float64Array(m * m);
    const values = new Float64Array(m);
    symmetricEigen(
      Float64Array.from(offsets, (o) => M[o]!),
      m,
      values,
      vectors,
    );
    const top = argMax(values, m);
    let least = 0;
    let square = 0;
    for (let i = 0; i < m; i++) {
      square += vectors[i * m + top]! ** 2;
      for (let j = 0; j < m; j++) {
        const vv = vectors[i * m + top]! * vectors[j * m + top]!;
        const o = offsets[i * m + j]!;
        // 2^-48 of the parts covers the rounding of the sum
        least += vv * M[o]! - Math.abs(vv) * (M[o + kernel.size - 1]! + 2 ** -48 * Math.abs(M[o]!));
      }
    }
    return sqrtDown(Math.max(0, least / (square * GROW)));
  };

  const confirm: CellProver["confirm"] = (lower, upper, bounds) => {
    runCell(lower, upper);
    if (!onCell.isRegular()) return false;
    if (!(bounds.rate >= claims.rate) || (n > m && !onCell.rate(bounds.rate, null).holds)) return false;
    for (const [s, { most }] of claims.spreads.entries()) {
      const value = bounds.spreads[s];
      if (value === undefined || !(value <= most) || !(onCell.spreads[s]!.upper() <= value)) return false;
    }
    for (const [c, { wbar, most }] of claims.pushes.entries()) {
      const value = bounds.pushes[c];
      if (value === undefined || !(value <= most) || !(onCell.sigma(wbar) <= value)) return false;
    }
    if (claims.authority !== null && m > 0) {
      if (!(bounds.authority <= claims.authority.most)) return false;
      const rho = stepDown(bounds.authority / stepUp(onCell.inputGain()));
      if (!(rho > 0) || !onCell.authority(claims.authority.rate, rho, null).holds) return false;
    }
    return true;
  };

  return { dimension, used: cells.used, examine, rateBelow, refute, confirm };
}

/** How much each dimension bends W, and a little of how much it tilts it. */
function addModelInfluence(evaluator: TaylorEvaluator, matrix: readonly Node[], influence: Float64Array): void {
  const { kernel, M } = evaluator;
  influence.fill(0);
  for (const node of matrix) {
    if (node === ZERO) continue;
    const o = evaluator.at(node);
    for (let i = 0; i < kernel.d; i++) {
      influence[i]! += Math.abs(M[o + 1 + i]!);
      for (let j = 0; j < kernel.d; j++)
        influence[i]! += Math.abs(M[o + kernel.quadratic(Math.min(i, j), Math.max(i, j))]!);
    }
  }
}

function checkClaims(claims: ProofClaims, p: number): void {
  if (!Number.isFinite(claims.rate)) throw new Error(`a proof needs a finite rate to prove; given ${claims.rate}`);
  for (const { wbar } of claims.pushes) {
    if (wbar.length !== p)
      throw new Error(`a proof of a push needs one bound a leftover channel: ${p}; given ${wbar.length}`);
    if (wbar.some((w) => !(w >= 0 && Number.isFinite(w))))
      throw new Error("a proof of a push needs finite bounds of 0 or more for every leftover channel");
  }
}
