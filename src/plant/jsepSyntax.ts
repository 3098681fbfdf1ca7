/**
 * The jsep parser set up for rate expressions, once, when this module is loaded: binary + - * / with the usual
 * precedence, unary + and -, and `^`, which binds tighter than a unary minus before it and groups to the right
 * (-x^2 = -(x^2), 2^-x^2 = 2^(-(x^2))). Every node gets `start` and `end`, offsets into the text.
 * jsep only builds a tree: it never evaluates text. It also parses member access, conditionals, arrays and strings;
 * parseExpression.ts refuses those nodes.
 */
import jsep from "jsep";

/** Deepest nesting of parentheses, calls, powers and signs. */
export const MAX_NESTING = 48;

export type SyntaxNode = jsep.Expression;

jsep.removeAllBinaryOps();
for (const sign of ["+", "-"]) jsep.addBinaryOp(sign, 1);
for (const operator of ["*", "/"]) jsep.addBinaryOp(operator, 2);
for (const operator of ["!", "~"]) jsep.removeUnaryOp(operator);
jsep.removeAllLiterals();

// One entry an open token of a parse in progress; gobbleToken runs the first hook at its start, the second at its end.
const openTokens = new WeakMap<jsep.HookScope, number[]>();

jsep.hooks.add("gobble-token", function (env) {
  const starts = openTokens.get(this) ?? [];
  openTokens.set(this, starts);
  starts.push(this.index);
  if (starts.length > MAX_NESTING) this.throwError(`nested more than ${MAX_NESTING} deep`);
  // jsep returns a number without running the hook that follows a token, so it is read here
  const number = /[0-9.]/.test(this.char) ? this.gobbleNumericLiteral() : undefined;
  if (number !== undefined) env.node = number;
});

jsep.hooks.add("after-token", function (env) {
  const starts = openTokens.get(this)!;
  const start = starts.at(-1)!;
  if (env.node) {
    env.node.start = start;
    env.node.end = this.index;
    this.gobbleSpaces();
    if (this.char === "^") {
      this.index++;
      const right = this.gobbleToken() || this.throwError("Expected expression after ^");
      env.node = { type: "BinaryExpression", operator: "^", left: env.node, right, start, end: right.end as number };
    }
  }
  starts.pop();
});

/** The syntax tree, or where and why the text has none. */
export function parseSyntax(text: string): { node: SyntaxNode } | { offset: number; description: string } {
  try {
    return { node: jsep(text) };
  } catch (error) {
    const { index, description } = error as { index?: unknown; description?: unknown };
    if (typeof index !== "number" || typeof description !== "string") throw error;
    return { offset: Math.min(index, text.length), description };
  }
}

/** Offsets of a node's text, [start, end). */
export function extentOf(node: SyntaxNode): { start: number; end: number } {
  const { start, end } = node;
  if (typeof start === "number" && typeof end === "number") return { start, end };
  // an operator without parentheses around it reaches from its first operand to its last
  const [first, last] = [node.left ?? node.test, node.right ?? node.alternate] as (SyntaxNode | undefined)[];
  return first && last ? { start: extentOf(first).start, end: extentOf(last).end } : { start: 0, end: 0 };
}
