/**
 * Constructors of expressions that drop what is plainly nothing: + 0, * 1, * 0, double negation, x sign(x) = |x|.
 * Constants are folded only where float64 holds the result exactly, so a simplified expression has the same real
 * value as the one it stands for and the prover may widen it soundly. (0 / x and 0 * x become 0 even where x is
 * singular: the prior is then taken as continued.)
 */
import type { Expression, FunctionName } from "./expression.js";

export const ZERO: Expression = { kind: "constant", value: 0 };
export const ONE: Expression = { kind: "constant", value: 1 };

export function constant(value: number): Expression {
  return { kind: "constant", value };
}

export function negate(of: Expression): Expression {
  if (of.kind === "constant") return constant(of.value === 0 ? 0 : -of.value);
  if (of.kind === "negate") return of.of;
  if (of.kind === "multiply" && of.left.kind === "constant") return multiply(negate(of.left), of.right);
  return { kind: "negate", of };
}

export function add(left: Expression, right: Expression): Expression {
  if (isConstant(left, 0)) return right;
  if (isConstant(right, 0)) return left;
  if (right.kind === "negate") return subtract(left, right.of);
  return foldIntegers(left, right, (a, b) => a + b) ?? { kind: "add", left, right };
}

export function subtract(left: Expression, right: Expression): Expression {
  if (isConstant(right, 0)) return left;
  if (isConstant(left, 0)) return negate(right);
  if (right.kind === "negate") return add(left, right.of);
  return foldIntegers(left, right, (a, b) => a - b) ?? { kind: "subtract", left, right };
}

/** Constants go left and outward, so that they meet and the product of x and sign(x) is seen. */
export function multiply(left: Expression, right: Expression): Expression {
  if (isConstant(left, 0) || isConstant(right, 0)) return ZERO;
  if (isConstant(left, 1)) return right;
  if (isConstant(right, 1)) return left;
  if (isConstant(left, -1)) return negate(right);
  if (isConstant(right, -1)) return negate(left);
  const folded = foldIntegers(left, right, (a, b) => a * b);
  if (folded !== null) return folded;
  if (left.kind === "negate") return negate(multiply(left.of, right));
  if (right.kind === "negate") return negate(multiply(left, right.of));
  if (right.kind === "constant" && left.kind !== "constant") return multiply(right, left);
  if (left.kind === "multiply" && left.left.kind === "constant" && right.kind !== "constant")
    return multiply(left.left, multiply(left.right, right));
  if (right.kind === "multiply" && right.left.kind === "constant" && left.kind !== "constant")
    return multiply(right.left, multiply(left, right.right));
  if (left.kind === "constant" && right.kind === "multiply" && right.left.kind === "constant") {
    const both = foldIntegers(left, right.left, (a, b) => a * b);
    if (both !== null) return multiply(both, right.right);
  }
  if (isSignOf(right, left)) return call("abs", [left]);
  if (left.kind === "multiply" && isSignOf(right, left.right)) return multiply(left.left, call("abs", [left.right]));
  if (isSignOf(left, right)) return call("abs", [right]);
  return { kind: "multiply", left, right };
}

export function divide(left: Expression, right: Expression): Expression {
  if (isConstant(left, 0) && !isConstant(right, 0)) return ZERO;
  if (isConstant(right, 1)) return left;
  if (left.kind === "negate") return negate(divide(left.of, right));
  return { kind: "divide", left, right };
}

export function power(base: Expression, exponent: number): Expression {
  if (exponent === 0) return ONE;
  if (exponent === 1) return base;
  return { kind: "power", base, exponent };
}

export function call(name: FunctionName, args: readonly Expression[]): Expression {
  return { kind: "call", name, args };
}

/** e rebuilt with the constructors above, every leaf replaced by what `leaf` makes of it. */
export function rebuild(e: Expression, leaf: (e: Expression) => Expression): Expression {
  const again = (part: Expression): Expression => rebuild(part, leaf);
  switch (e.kind) {
    case "constant":
    case "state":
    case "input":
      return leaf(e);
    case "negate":
      return negate(again(e.of));
    case "add":
      return add(again(e.left), again(e.right));
    case "subtract":
      return subtract(again(e.left), again(e.right));
    case "multiply":
      return multiply(again(e.left), again(e.right));
    case "divide":
      return divide(again(e.left), again(e.right));
    case "power":
      return power(again(e.base), e.exponent);
    case "call":
      return call(e.name, e.args.map(again));
  }
}

export function isConstant(e: Expression, value: number): boolean {
  return e.kind === "constant" && e.value === value;
}

/** Same tree, node by node. */
export function isSame(a: Expression, b: Expression): boolean {
  if (a === b) return true;
  switch (a.kind) {
    case "constant":
      return b.kind === "constant" && a.value === b.value;
    case "state":
    case "input":
      return b.kind === a.kind && a.index === b.index;
    case "negate":
      return b.kind === "negate" && isSame(a.of, b.of);
    case "power":
      return b.kind === "power" && a.exponent === b.exponent && isSame(a.base, b.base);
    case "call":
      return b.kind === "call" && a.name === b.name && a.args.every((arg, i) => isSame(arg, b.args[i]!));
    default:
      return b.kind === a.kind && isSame(a.left, b.left) && isSame(a.right, b.right);
  }
}

function isSignOf(e: Expression, of: Expression): boolean {
  return e.kind === "call" && e.name === "sign" && isSame(e.args[0]!, of);
}

function foldIntegers(
  left: Expression,
  right: Expression,
  operate: (a: number, b: number) => number,
): Expression | null {
  if (left.kind !== "constant" || right.kind !== "constant") return null;
  const value = operate(left.value, right.value);
  const isExact = [left.value, right.value, value].every(Number.isSafeInteger);
  return isExact ? constant(value) : null;
}
