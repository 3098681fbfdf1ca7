/**
 * Upper bounds of c^T W c over a cell for the directions of spread.ts. For a position pair with W = [[xx, xy], [xy, yy]]
 *   c(phi)^T W c(phi) = mean + a cos 2 phi + b sin 2 phi,   mean = (xx + yy)/2, a = (xx - yy)/2, b = xy.
 * The directions allowed make an arc of the circle (cos, sin)(2 phi); a linear function of (a, b) over the arc is largest
 * at a corner of any polygon around it. Arc by arc (half-angle eta) the corners are the ends and the crossing of their
 * tangents, 1/cos(eta) from the middle, so each corner needs one bound of a linear combination of models.
 */
import type { BodyFrame } from "../../model/controlAffine.js";
import { stepUp } from "../../num/directed.js";
import { interval } from "../../num/interval.js";
import { cosInterval } from "../../num/intervalFunctions.js";
import type { Node, TaylorEvaluator } from "../../num/taylorGraph.js";
import { ZERO } from "../../num/taylorGraph.js";
import type { SumOfProducts } from "../../num/taylorModel.js";
import type { MarginDirection } from "../spread.js";

/** Largest half-angle of one arc, rad: a polygon corner overshoots by 1/cos(eta) - 1, 0.5 %. */
const HALF_ANGLE = 0.1;

export interface SpreadBound {
  /** Upper bound over the cell after a run. */
  upper(): number;
  /** Lower bound of the supremum at the centre of the cell. */
  lower(): number;
}

export function spreadBound(
  evaluator: TaylorEvaluator,
  W: readonly Node[],
  n: number,
  frame: BodyFrame | null,
  direction: MarginDirection,
  scratch: Node,
): SpreadBound {
  const { kernel, M } = evaluator;
  if (direction.kind === "state" && !(frame?.position.includes(direction.state) ?? false)) {
    const node = W[direction.state * n + direction.state]!;
    return {
      upper: () => (node === ZERO ? 0 : kernel.upper(M, evaluator.at(node))),
      lower: () => (node === ZERO ? 0 : centreLower(evaluator, node)),
    };
  }
  if (frame === null)
    throw new Error(`a '${direction.kind}' margin needs a declared planar rotation; the plant declares none`);
  const [i, j] = frame.position;
  const entries = [W[i * n + i]!, W[j * n + j]!, W[i * n + j]!];
  const out = evaluator.at(scratch);
  const { middle, half } = arcOf(direction);
  const arcs = Math.max(1, Math.ceil(half / HALF_ANGLE));
  const eta = half / arcs;
  const stretch = stepUp(1 / cosInterval(interval(eta)).lo);
  /** mean + factor (a cos angle + b sin angle) as weights of xx, yy, xy. */
  const combination = (angle: number, factor: number): SumOfProducts => {
    const [cos, sin] = [Math.cos(angle) * factor, Math.sin(angle) * factor];
    const weights = [(1 + cos) / 2, (1 - cos) / 2, sin];
    const linear = entries.flatMap((node, e) =>
      node === ZERO ? [] : [{ weight: weights[e]!, of: evaluator.at(node) }],
    );
    return { constant: 0, linear, products: [] };
  };
  const from = middle - half;
  const onArc = Array.from({ length: 2 * arcs + 1 }, (_, i) => combination(from + eta * i, 1));
  const around = onArc.map((ends, i) => (i % 2 === 0 ? ends : combination(from + eta * i, stretch)));
  // (cos, sin) as computed are off by at most 2^-48: that times |a| + |b| <= 2 (|xx| + |yy| + |xy|) is added to every corner
  const slack = (): number => {
    let sizes = 0;
    for (const node of entries)
      if (node !== ZERO) sizes += Math.abs(M[evaluator.at(node)]!) + kernel.spread(M, evaluator.at(node));
    return 2 ** -45 * sizes;
  };
  const largest = (corners: readonly SumOfProducts[], value: () => number): number => {
    let most = Number.NEGATIVE_INFINITY;
    for (const corner of corners) {
      kernel.sum(M, corner, out);
      most = Math.max(most, value());
    }
    return most;
  };
  return {
    upper: () => stepUp(largest(around, () => kernel.upper(M, out)) + slack()),
    lower: () => largest(onArc, () => M[out]! - M[out + kernel.size - 1]!) - slack(),
  };
}

function centreLower(evaluator: TaylorEvaluator, node: Node): number {
  const { kernel, M } = evaluator;
  const o = evaluator.at(node);
  // other coefficients vanish on a point cell
  return -stepUp(M[o + kernel.size - 1]! - M[o]!);
}

/** The arc of 2 phi: its middle and half-angle. */
function arcOf(direction: MarginDirection): { middle: number; half: number } {
  if (direction.kind === "state" || direction.kind === "planar") return { middle: 0, half: Math.PI * (1 + 2 ** -50) };
  const half = Math.min(Math.PI, 2 * direction.headingError) * (1 + 2 ** -50);
  return { middle: direction.kind === "along" ? 0 : Math.PI, half };
}
