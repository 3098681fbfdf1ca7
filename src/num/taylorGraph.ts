/**
 * A computation recorded once as a graph of nodes and then run over many cells in Taylor models (taylorModel.ts). A node
 * is the number of its slot; ZERO is the node that is nothing, and is dropped where it is added or multiplied.
 *
 * Variables are real coordinates; a cell gives each a centre and a radius. Variables that no node reads get no dimension.
 */
import { type Interval, interval } from "./interval.js";
import { PI_INTERVAL } from "./intervalFunctions.js";
import {
  absExpansion,
  atanExpansion,
  cosExpansion,
  expExpansion,
  logExpansion,
  newExpansion,
  powerExpansion,
  reciprocalExpansion,
  type SmoothFunction,
  signExpansion,
  sinExpansion,
  sqrtExpansion,
  tanExpansion,
  tanhExpansion,
  tanhSlopeExpansion,
} from "./taylorFunctions.js";
import { type SumOfProducts, type TaylorKernel, taylorKernel } from "./taylorModel.js";

export type Node = number;
/** The node that is identically zero. */
export const ZERO: Node = -1;

/** Runs one step over the slots. */
export type Step = (M: Float64Array) => void;
/** `at` gives the offset of a node's slot. */
export type StepMaker = (kernel: TaylorKernel, at: (node: Node) => number) => Step;

export const SMOOTH = {
  sin: sinExpansion,
  cos: cosExpansion,
  tan: tanExpansion,
  tanh: tanhExpansion,
  tanhSlope: tanhSlopeExpansion,
  exp: expExpansion,
  log: logExpansion,
  sqrt: sqrtExpansion,
  abs: absExpansion,
  sign: signExpansion,
  atan: atanExpansion,
  reciprocal: reciprocalExpansion,
} as const satisfies Record<string, SmoothFunction>;

/** weight * node, or weight * left * right. */
export interface Term {
  readonly weight: number;
  readonly left: Node;
  /** Absent: a linear term. */
  readonly right?: Node;
}

export interface TaylorGraph {
  readonly variables: number;
  constant(value: number): Node;
  /** A constant known to lie in an interval. */
  constantWithin(value: Interval): Node;
  variable(index: number): Node;
  /** constant + sum of terms; terms with ZERO are dropped, an empty sum is ZERO. */
  sum(terms: readonly Term[], constant?: number): Node;
  product(left: Node, right: Node): Node;
  quotient(left: Node, right: Node): Node;
  apply(name: keyof typeof SMOOTH, of: Node): Node;
  power(base: Node, exponent: number): Node;
  atan2(y: Node, x: Node): Node;
  /** `count` nodes written by one step, such as a network. */
  custom(count: number, step: StepMaker): readonly Node[];
  /** `count` slots that no step writes: room for a caller's own work between runs. */
  scratch(count: number): readonly Node[];
  /** The recorded graph on cells of the used variables; with `points` every cell is a point (d = 0). */
  evaluator(mode: "cells" | "points"): TaylorEvaluator;
  /** Indices of variables that some node reads, ascending. */
  usedVariables(): readonly number[];
}

export interface TaylorEvaluator {
  readonly kernel: TaylorKernel;
  readonly used: readonly number[];
  /** Slots, rewritten by each run. */
  readonly M: Float64Array;
  at(node: Node): number;
  /** Models of all nodes for variables within centre +- radius (one entry a variable). */
  run(centre: Float64Array, radius: Float64Array): void;
}

export function taylorGraph(variables: number): TaylorGraph {
  const makers: StepMaker[] = [];
  const variableNodes = new Map<number, Node>();
  const constants = new Map<string, Node>();
  const values = new Map<Node, number>();
  const memo = new Map<string, Node>();
  const fixed: { node: Node; value: number; radius: number }[] = [];
  let count = 0;
  const newNode = (): Node => count++;

  const constantWithin = (value: Interval): Node => {
    const key = `${value.lo} ${value.hi}`;
    const known = constants.get(key);
    if (known !== undefined) return known;
    const node = newNode();
    const middle = value.lo === value.hi ? value.lo : value.lo / 2 + value.hi / 2;
    const radius = value.lo === value.hi ? 0 : 2 * Math.max(value.hi - middle, middle - value.lo);
    fixed.push({ node, value: middle, radius });
    constants.set(key, node);
    if (radius === 0) values.set(node, middle);
    return node;
  };

  const constant = (value: number): Node => (value === 0 ? ZERO : constantWithin(interval(value)));

  const once = (key: string, make: () => Node): Node => {
    const known = memo.get(key);
    if (known !== undefined) return known;
    const node = make();
    memo.set(key, node);
    return node;
  };

  const variable = (index: number): Node => {
    if (!Number.isInteger(index) || index < 0 || index >= variables)
      throw new Error(`graph variable ${index}: allowed are 0 to ${variables - 1}`);
    const known = variableNodes.get(index);
    if (known !== undefined) return known;
    const node = newNode();
    variableNodes.set(index, node);
    return node;
  };

  /** A product with an exact factor 1 or with one constant factor is linear. */
  const simpler = (term: Term): Term => {
    if (term.right === undefined) return term;
    const { weight, left, right } = term;
    const [l, r] = [values.get(left), values.get(right)];
    if (l !== undefined && (l === 1 || l === -1 || weight === 1 || weight === -1))
      return { weight: weight * l, left: right };
    if (r !== undefined && (r === 1 || r === -1 || weight === 1 || weight === -1)) return { weight: weight * r, left };
    return term;
  };

  const sum = (terms: readonly Term[], offset = 0): Node => {
    const kept = terms.filter((t) => t.weight !== 0 && t.left !== ZERO && t.right !== ZERO).map(simpler);
    if (kept.length === 0) return constant(offset);
    const only = kept[0]!;
    if (kept.length === 1 && offset === 0 && only.right === undefined && only.weight === 1) return only.left;
    const key = `sum ${offset} ${kept.map((t) => `${t.weight}*${t.left}*${t.right ?? ""}`).join(" ")}`;
    return once(key, () => {
      const out = newNode();
      makers.push((kernel, at) => {
        const sumTerms: SumOfProducts = {
          constant: offset,
          linear: kept.filter((t) => t.right === undefined).map((t) => ({ weight: t.weight, of: at(t.left) })),
          products: kept
            .filter((t) => t.right !== undefined)
            .map((t) => ({ weight: t.weight, left: at(t.left), right: at(t.right!) })),
        };
        const to = at(out);
        const single = sumTerms.products[0];
        if (offset === 0 && kept.length === 1 && single?.weight === 1)
          return (M) => kernel.product(M, single.left, single.right, to);
        return (M) => kernel.sum(M, sumTerms, to);
      });
      return out;
    });
  };

  const product = (left: Node, right: Node): Node => sum([{ weight: 1, left, right }]);

  const smooth = (key: string, f: SmoothFunction, of: Node): Node =>
    once(`${key} ${of}`, () => {
      const out = newNode();
      makers.push((kernel, at) => {
        const phi = newExpansion();
        const [from, to] = [at(of), at(out)];
        return (M) => {
          const spread = kernel.spread(M, from);
          f(M[from]!, spread, phi);
          kernel.compose(M, from, spread, phi, to);
        };
      });
      return out;
    });

  const apply: TaylorGraph["apply"] = (name, of) => {
    if (of !== ZERO) return smooth(name, SMOOTH[name], of);
    if (name === "cos" || name === "exp" || name === "tanhSlope") return constant(1);
    if (name === "log" || name === "reciprocal") throw new Error(`${name}(0) in a rate: not defined for any state`);
    if (name === "sqrt" || name === "sign" || name === "abs") return ZERO;
    return ZERO;
  };

  const quotient = (left: Node, right: Node): Node => {
    if (right === ZERO) throw new Error("a rate divides by zero at every state");
    const r = values.get(right);
    if (r === 1) return left;
    return product(left, apply("reciprocal", right));
  };

  const power = (base: Node, exponent: number): Node => {
    if (exponent === 0) return constant(1);
    if (exponent === 1) return base;
    if (base === ZERO) {
      if (exponent > 0) return ZERO;
      throw new Error(`0 ^ ${exponent} in a rate: not defined for any state`);
    }
    if (exponent === 2) return product(base, base);
    return smooth(`power ${exponent}`, powerExpansion(exponent), base);
  };

  /** Angle of (x, y) by atan of the ratio that stays finite over the cell; nothing where the cell touches the cut. */
  const atan2 = (y: Node, x: Node): Node =>
    once(`atan2 ${y} ${x}`, () => {
      const [a, b] = [y === ZERO ? constantWithin(interval(0)) : y, x === ZERO ? constantWithin(interval(0)) : x];
      const out = newNode();
      const work = [newNode(), newNode(), newNode()];
      const quarter: Interval = { lo: PI_INTERVAL.lo / 2, hi: PI_INTERVAL.hi / 2 };
      makers.push((kernel, at) => {
        const phi = newExpansion();
        const [ya, xb, to] = [at(a), at(b), at(out)];
        const [inverse, ratio, angle] = work.map(at) as [number, number, number];
        const compose = (M: Float64Array, f: SmoothFunction, from: number, into: number): void => {
          const spread = kernel.spread(M, from);
          f(M[from]!, spread, phi);
          kernel.compose(M, from, spread, phi, into);
        };
        const rest = kernel.size - 1;
        const around = (M: Float64Array, above: number, below: number, sign: number, middle: number): void => {
          compose(M, reciprocalExpansion, below, inverse);
          kernel.product(M, above, inverse, ratio);
          compose(M, atanExpansion, ratio, angle);
          kernel.sum(M, { constant: middle, linear: [{ weight: sign, of: angle }], products: [] }, to);
          M[to + rest]! += quarter.hi - quarter.lo + 2 ** -50;
        };
        return (M) => {
          if (kernel.lower(M, xb) > 0) around(M, ya, xb, 1, 0);
          else if (kernel.lower(M, ya) > 0) around(M, xb, ya, -1, Math.PI / 2);
          else if (kernel.upper(M, ya) < 0) around(M, xb, ya, -1, -Math.PI / 2);
          else {
            // the origin or the cut, where the angle jumps: nothing is claimed
            M.fill(0, to, to + kernel.size);
            M[to + rest] = Number.POSITIVE_INFINITY;
          }
        };
      });
      return out;
    });

  const custom = (size: number, step: StepMaker): readonly Node[] => {
    const nodes = Array.from({ length: size }, newNode);
    makers.push(step);
    return nodes;
  };

  const usedVariables = (): readonly number[] => [...variableNodes.keys()].sort((a, b) => a - b);

  const evaluator = (mode: "cells" | "points"): TaylorEvaluator => {
    const used = usedVariables();
    const kernel = taylorKernel(mode === "points" ? 0 : used.length);
    const at = (node: Node): number => node * kernel.size;
    const M = new Float64Array(count * kernel.size);
    for (const { node, value, radius } of fixed) {
      M[at(node)] = value;
      M[at(node) + kernel.size - 1] = radius;
    }
    const steps = makers.map((make) => make(kernel, at));
    return {
      kernel,
      used,
      M,
      at,
      run: (centre, radius) => {
        used.forEach((index, dimension) => {
          const o = at(variableNodes.get(index)!);
          M[o] = centre[index]!;
          if (kernel.d > 0) M[o + 1 + dimension] = radius[index]!;
        });
        for (let s = 0; s < steps.length; s++) steps[s]!(M);
      },
    };
  };

  return {
    variables,
    constant,
    constantWithin,
    variable,
    sum,
    product,
    quotient,
    apply,
    power,
    atan2,
    custom,
    scratch: (size) => Array.from({ length: size }, newNode),
    evaluator,
    usedVariables,
  };
}
