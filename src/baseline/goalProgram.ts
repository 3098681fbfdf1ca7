/**
 * The constant-metric problem at one rate as semidefinite programs: exact, not tangents. Every function below is
 * concave and homogeneous of degree one in (W, rho), so that the margin and the authority are quasi-convex:
 *   y_c = 1 / (g_c^T W^-1 g_c)        the largest y with  W >= y g_c g_c^T
 *   y_B = 1 / eigmax(B^T W^-1 B)      the largest y with  W >= y B B^T
 *   H   = 1 / s^2                     the largest H with  sum_c wbar_c b_c <= H,  b_c >= H^{3/2} y_c^{-1/2},
 *                                     as  H^2 <= b_c u_c,  u_c^2 <= y_c H  (a weighted harmonic mean of the sqrt y_c)
 *   J   = sqrt(H y_B) = 1 / (s sqrt e)
 * so that margin = Omega sqrt(w / H) and authority = 1/2 Omega rho / J. Two normalisations of one set of inequalities:
 *   leastAuthority   maximise J   with rho <= 1
 *   leastRoom        maximise H   with v <= 1,  rho <= (2 limit / Omega) J
 *   leastMargin      maximise H   with w <= 1,  rho <= (2 limit / Omega) J,  v <= (room / Omega)^2 H
 * W and rho bounded by `BOX` times their start keep the centre finite where a plant leaves W free.
 * Source of the geometric-mean cones: Ben-Tal and Nemirovski, "Lectures on Modern Convex Optimization", 2001, section 3.3.
 */
import { symmetricEigen } from "../num/dense.js";
import type { ConditionSample } from "./conditionSample.js";
import { type ConstantProblem, columnOf, type GainedMetric, inverseNorm, measure } from "./constantProblem.js";
import { minimise, relativeGap } from "./logDetBarrier.js";
import { gram, metricBlocks, rotatedCone, smallBlock } from "./metricBlocks.js";
import type { Block } from "./semidefiniteBlock.js";

export interface GoalPoint extends GainedMetric {
  /** Bound of the distance to the optimum (authority or margin), relative; null when it is not proved. */
  readonly gap: number | null;
  /** All variables of the programs, strictly feasible at this rate. */
  readonly x: Float64Array;
}

export interface GoalPrograms {
  /** A point from a strictly contracting W with a strictly sufficient gain. */
  start(metric: GainedMetric): GoalPoint;
  /** The least rho s sqrt(e); stops early below `enough`. Null when `from` is not strictly inside. */
  leastAuthority(from: GoalPoint, enough: number): GoalPoint | null;
  /** The least s sqrt(v) with rho s sqrt(e) <= limit: most room for plans. Null when `from` is not strictly inside. */
  leastRoom(from: GoalPoint, limit: number): GoalPoint | null;
  /** The least s sqrt(w) with rho s sqrt(e) <= limit and s sqrt(v) <= room. Null when `from` is not strictly inside. */
  leastMargin(from: GoalPoint, limit: number, room: number): GoalPoint | null;
}

const BOX = 1e4;
/** Where a start or a normalised size is put between its bounds: anywhere well inside. */
const INSIDE = 0.75;
const isClose = relativeGap(2e-3);

export function goalPrograms(problem: ConstantProblem, rate: number): GoalPrograms {
  const { n, m, samples } = problem;
  // the channels in units of their sum, so that H is of the size of the y
  const scale = problem.wbar.reduce((sum, value) => sum + value, 0);
  const wbar = problem.wbar.map((bound) => bound / scale);
  const { inputs, columns, sets } = distinctParts(samples, n, wbar);
  const [RHO, H, J, YB, Y] = [0, 1, 2, 3, 4];
  const U = Y + columns.length;
  const B = U + columns.length;
  const blocks = metricBlocks(n, B + columns.length);
  const shared: Block[] = [
    ...samples.flatMap(({ B: input, jacobians }) =>
      jacobians.map((K) => blocks.condition(K, rate, gram(input, n, m), RHO)),
    ),
    ...inputs.map((input) => blocks.exceeds(gram(input, n, m), YB)),
    ...columns.flatMap((g, c) => [
      blocks.exceeds(gram(g, n, 1), Y + c),
      rotatedCone(B + c, U + c, H),
      rotatedCone(Y + c, H, U + c),
    ]),
    ...sets.map((set) => smallBlock([0], [H, [1]], ...set.map(({ column, bound }) => [B + column, [-bound]] as const))),
    rotatedCone(H, YB, J),
    smallBlock([0], [RHO, [1]]),
  ];

  const start = ({ W, rho }: GainedMetric): GoalPoint => {
    const x = new Float64Array(blocks.size);
    blocks.write(W, x);
    x[RHO] = rho;
    x[YB] = INSIDE / Math.max(...inputs.map((input) => inverseNorm(W, input, n, m)));
    columns.forEach((g, c) => {
      x[Y + c] = INSIDE / inverseNorm(W, g, n, 1);
    });
    const sums = sets.map((set) => set.reduce((sum, { column, bound }) => sum + bound / Math.sqrt(x[Y + column]!), 0));
    x[H] = INSIDE ** 5 / Math.max(...sums) ** 2;
    columns.forEach((_, c) => {
      x[U + c] = Math.sqrt(x[Y + c]! * x[H]!) * INSIDE;
      x[B + c] = x[H]! ** 2 / x[U + c]! / INSIDE;
    });
    x[J] = Math.sqrt(x[H]! * x[YB]!) * INSIDE;
    return { W, rho, gap: null, x };
  };

  /** Everything is homogeneous of degree one: the point `size` times as large, then the variable `goal` made largest. */
  const enlarge = (from: GoalPoint, size: number, goal: number, target: number, bounds: Block[]): GoalPoint | null => {
    const x = from.x.map((value) => value * size);
    const cost = new Float64Array(blocks.size);
    cost[goal] = -1 / x[goal]!;
    const box = [blocks.below(BOX * largestEigenvalue(blocks.read(x), n)), smallBlock([BOX * x[RHO]!], [RHO, [-1]])];
    const result = minimise(
      cost,
      [...shared, ...box, ...bounds],
      x,
      (value, gap) => value < target * cost[goal]! || isClose(value, gap),
    );
    if (result.status === "infeasibleStart") return null;
    const W = blocks.read(result.x);
    if (result.gap === null) return { W, rho: result.x[RHO]!, gap: null, x: result.x };
    // the goal is at most (|value| + gap) / |value| times as large; margin goes with H^-1/2, authority with J^-1
    const share = Math.abs(result.value) / (Math.abs(result.value) + result.gap);
    return { W, rho: result.x[RHO]!, gap: 1 - (goal === H ? Math.sqrt(share) : share), x: result.x };
  };

  const authorityWithin = (limit: number): Block => smallBlock([0], [J, [limit / scale]], [RHO, [-1]]);
  /** share * H - c^T W c >= 0. */
  const spreadWithin = (c: Float64Array, share: number): Block => {
    const { size, constant, terms } = blocks.spread(c, 1, 0);
    return { size, constant, terms: [...terms, { variable: H, matrix: Float64Array.of(share) }] };
  };

  return {
    start,
    leastAuthority: (from, enough) =>
      enlarge(from, INSIDE / from.rho, J, scale / enough, [smallBlock([1], [RHO, [-1]])]),
    leastRoom: (from, limit) =>
      enlarge(from, INSIDE / measure(problem, from.W).v, H, Number.POSITIVE_INFINITY, [
        ...problem.rooms.map((c) => blocks.spread(c, 1, 1)),
        authorityWithin(limit),
      ]),
    leastMargin: (from, limit, room) =>
      enlarge(from, INSIDE / measure(problem, from.W).w, H, Number.POSITIVE_INFINITY, [
        blocks.spread(problem.goal, problem.goal.length / n, 1),
        authorityWithin(limit),
        ...problem.rooms.map((c) => spreadWithin(c, (room / scale) ** 2)),
      ]),
  };
}

function largestEigenvalue(W: Float64Array, n: number): number {
  const values = new Float64Array(n);
  symmetricEigen(W.slice(), n, values, null);
  return Math.max(...values);
}

/** The distinct input matrices, the distinct columns of G that disturb, and per distinct G its columns with their bounds. */
function distinctParts(samples: readonly ConditionSample[], n: number, wbar: Float64Array) {
  const p = wbar.length;
  const key = (array: Float64Array): string => Array.from(array, (v) => v.toPrecision(12)).join();
  const distinct = (arrays: readonly Float64Array[]): Float64Array[] => [
    ...new Map(arrays.map((a) => [key(a), a])).values(),
  ];
  const columns: Float64Array[] = [];
  const known = new Map<string, number>();
  const sets = distinct(samples.map((sample) => sample.G)).map((G) =>
    Array.from(wbar, (bound, c) => ({ bound, g: columnOf(G, n, p, c) }))
      .filter(({ bound, g }) => bound > 0 && g.some((value) => value !== 0))
      .map(({ bound, g }) => {
        const column = known.get(key(g)) ?? columns.push(g) - 1;
        known.set(key(g), column);
        return { column, bound };
      }),
  );
  return {
    inputs: distinct(samples.map((sample) => sample.B)),
    columns,
    sets: sets.filter((set) => set.length > 0),
  };
}
