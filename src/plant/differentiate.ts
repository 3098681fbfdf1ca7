/**
 * Exact partial derivatives by the chain rule, e.g. Abramowitz and Stegun, "Handbook of Mathematical Functions", 1964,
 * 3.3.5-3.3.10 and 4.2-4.4; atan2(y, x): (x dy - y dx) / (x^2 + y^2). d|a| = sign(a) da, which is 0 at a = 0.
 * No rounding enters (see simplify.ts): the result is the derivative of the same real function.
 */
import type { Expression } from "./expression.js";
import { add, call, constant, divide, multiply, negate, ONE, power, subtract, ZERO } from "./simplify.js";

/** d e / d leaf. */
export function differentiate(
  e: Expression,
  leaf: { readonly kind: "state" | "input"; readonly index: number },
): Expression {
  const d = (part: Expression): Expression => differentiate(part, leaf);
  switch (e.kind) {
    case "constant":
      return ZERO;
    case "state":
    case "input":
      return e.kind === leaf.kind && e.index === leaf.index ? ONE : ZERO;
    case "negate":
      return negate(d(e.of));
    case "add":
      return add(d(e.left), d(e.right));
    case "subtract":
      return subtract(d(e.left), d(e.right));
    case "multiply":
      return add(multiply(d(e.left), e.right), multiply(e.left, d(e.right)));
    case "divide":
      // (a / b)' = a'/b - (a / b^2) b'
      return subtract(divide(d(e.left), e.right), multiply(divide(e.left, power(e.right, 2)), d(e.right)));
    case "power":
      return multiply(powerSlope(e.base, e.exponent), d(e.base));
    case "call":
      return callDerivative(e.name, e.args, e.args.map(d));
  }
}

/** k b^(k-1); written k b^k / b where k - 1 is no float64 (the two are equal). TwoSum: Knuth, TAOCP 2, 4.2.2. */
function powerSlope(base: Expression, exponent: number): Expression {
  const below = exponent - 1;
  const taken = below - exponent;
  const roundoff = exponent - (below - taken) + (-1 - taken);
  const body = roundoff === 0 ? power(base, below) : divide(power(base, exponent), base);
  return multiply(constant(exponent), body);
}

type Call = Extract<Expression, { kind: "call" }>;

function callDerivative(name: Call["name"], args: readonly Expression[], slopes: readonly Expression[]): Expression {
  const a = args[0]!;
  const da = slopes[0]!;
  switch (name) {
    case "sin":
      return multiply(call("cos", [a]), da);
    case "cos":
      return negate(multiply(call("sin", [a]), da));
    case "tan":
      return multiply(add(ONE, power(call("tan", [a]), 2)), da);
    case "tanh":
      return multiply(subtract(ONE, power(call("tanh", [a]), 2)), da);
    case "exp":
      return multiply(call("exp", [a]), da);
    case "log":
      return divide(da, a);
    case "sqrt":
      return divide(da, multiply(constant(2), call("sqrt", [a])));
    case "abs":
      return multiply(call("sign", [a]), da);
    case "sign":
      return ZERO;
    case "atan2": {
      const b = args[1]!;
      const cross = subtract(multiply(b, da), multiply(a, slopes[1]!));
      return divide(cross, add(power(a, 2), power(b, 2)));
    }
  }
}
