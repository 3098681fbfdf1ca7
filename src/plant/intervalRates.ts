/** Rate expressions as nodes of a Taylor graph: enclosed over cells, in SI. Derivatives are exact trees (differentiate.ts). */
import type { Node, TaylorGraph } from "../num/taylorGraph.js";
import { ZERO } from "../num/taylorGraph.js";
import { partsOf } from "./evaluateExpression.js";
import type { Expression } from "./expression.js";

/** states: the SI value of each state as a node. An input in the expression throws: split it first (splitAffine). */
export function expressionNode(graph: TaylorGraph, e: Expression, states: readonly Node[]): Node {
  const node = (part: Expression): Node => expressionNode(graph, part, states);
  switch (e.kind) {
    case "constant":
      return graph.constant(e.value);
    case "state":
      return states[e.index]!;
    case "input":
      throw new Error("an enclosed rate holds an input; split it into f and B first (splitAffine)");
    case "negate":
      return graph.sum([{ weight: -1, left: node(e.of) }]);
    case "add":
    case "subtract":
      return graph.sum([
        { weight: 1, left: node(e.left) },
        { weight: e.kind === "add" ? 1 : -1, left: node(e.right) },
      ]);
    case "multiply":
      return graph.product(node(e.left), node(e.right));
    case "divide": {
      const left = node(e.left);
      return left === ZERO ? ZERO : graph.quotient(left, node(e.right));
    }
    case "power":
      return graph.power(node(e.base), e.exponent);
    case "call":
      if (e.name === "atan2") return graph.atan2(node(e.args[0]!), node(e.args[1]!));
      return graph.apply(e.name, node(e.args[0]!));
  }
}

/** True when the state occurs in e. */
export function mentionsState(e: Expression, index: number): boolean {
  return (e.kind === "state" && e.index === index) || partsOf(e).some((part) => mentionsState(part, index));
}
