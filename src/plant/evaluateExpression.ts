/** Value of an expression by walking its tree. SI. Slow and plain: compileRates.ts is the fast way to the same number. */
import type { Expression } from "./expression.js";

/** x: state values, u: input values. A singular expression gives a non-finite number. */
export function evaluateExpression(e: Expression, x: ArrayLike<number>, u: ArrayLike<number>): number {
  const value = (part: Expression): number => evaluateExpression(part, x, u);
  switch (e.kind) {
    case "constant":
      return e.value;
    case "state":
      return x[e.index]!;
    case "input":
      return u[e.index]!;
    case "negate":
      return -value(e.of);
    case "add":
      return value(e.left) + value(e.right);
    case "subtract":
      return value(e.left) - value(e.right);
    case "multiply":
      return value(e.left) * value(e.right);
    case "divide":
      return value(e.left) / value(e.right);
    case "power":
      return value(e.base) ** e.exponent;
    case "call":
      return e.name === "atan2" ? Math.atan2(value(e.args[0]!), value(e.args[1]!)) : Math[e.name](value(e.args[0]!));
  }
}

/** The parts of a node, left to right; none for a leaf. */
export function partsOf(e: Expression): readonly Expression[] {
  switch (e.kind) {
    case "constant":
    case "state":
    case "input":
      return [];
    case "negate":
      return [e.of];
    case "power":
      return [e.base];
    case "call":
      return e.args;
    default:
      return [e.left, e.right];
  }
}

/** True when a leaf of the given kind occurs in e. */
export function mentions(e: Expression, kind: "state" | "input"): boolean {
  return e.kind === kind || partsOf(e).some((part) => mentions(part, kind));
}
