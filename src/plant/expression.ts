/**
 * The syntax tree of a rate expression after parsing: only states, parameters and inputs as leaves, only the
 * functions of FUNCTIONS, every power with a constant exponent. Enforced by the parser (parseExpression.ts); relied
 * on by differentiation, compilation and the interval evaluation of the prover.
 */
export const FUNCTIONS = ["sin", "cos", "tan", "tanh", "exp", "log", "sqrt", "abs", "atan2"] as const;
/** What a plant file may call, and `sign` (-1, 0, 1): not for plant files, only as the derivative of abs. */
export type FunctionName = (typeof FUNCTIONS)[number] | "sign";

export type Expression =
  | { readonly kind: "constant"; readonly value: number }
  | { readonly kind: "state"; readonly index: number }
  | { readonly kind: "input"; readonly index: number }
  | { readonly kind: "negate"; readonly of: Expression }
  | { readonly kind: "add" | "subtract" | "multiply" | "divide"; readonly left: Expression; readonly right: Expression }
  /** base ^ exponent with a constant real exponent; an integer exponent is defined for a negative base too. */
  | { readonly kind: "power"; readonly base: Expression; readonly exponent: number }
  | { readonly kind: "call"; readonly name: FunctionName; readonly args: readonly Expression[] };
