/**
 * Text of a rate expression -> Expression. Only what is listed here passes: numbers, `pi`, the names given, unary and
 * binary + - * /, ^ with a constant exponent, and calls of FUNCTIONS. Everything else that the syntax could hold
 * (member access, other calls, conditionals, arrays, strings, comparisons) is refused with its place. Text is never
 * evaluated.
 */
import { evaluateExpression, mentions } from "./evaluateExpression.js";
import { type Expression, FUNCTIONS, type FunctionName } from "./expression.js";
import { extentOf, parseSyntax, type SyntaxNode } from "./jsepSyntax.js";
import { nearestName } from "./nearestName.js";
import { constant } from "./simplify.js";

/** Longest text and deepest tree of one expression. */
export const MAX_LENGTH = 2000;
export const MAX_DEPTH = 200;

/** What an expression may name. Names are distinct; a parameter stands for its value. */
export interface ExpressionNames {
  readonly states: readonly string[];
  readonly inputs: readonly string[];
  readonly parameters: ReadonlyMap<string, number>;
}

export interface ExpressionProblem {
  /** Character offset into the text, from 0. */
  readonly offset: number;
  readonly message: string;
  readonly suggestion?: string;
}

/** Where the text of a node stands: offsets [start, end). */
export interface Place {
  readonly start: number;
  readonly end: number;
}

export type ParsedExpression =
  | { readonly ok: true; readonly expression: Expression; readonly places: ReadonlyMap<Expression, Place> }
  | { readonly ok: false; readonly problems: readonly ExpressionProblem[] };

export function parseExpression(text: string, names: ExpressionNames): ParsedExpression {
  if (text.length > MAX_LENGTH) {
    const message = `the expression has ${text.length} characters; at most ${MAX_LENGTH} are allowed: split it with parameters`;
    return { ok: false, problems: [{ offset: MAX_LENGTH, message }] };
  }
  if (text.trim() === "")
    return { ok: false, problems: [{ offset: 0, message: "the expression is empty; write 0 for a zero rate" }] };
  const syntax = parseSyntax(text);
  if ("description" in syntax) return { ok: false, problems: [syntaxProblem(text, syntax)] };
  const builder = new ExpressionBuilder(text, names);
  const expression = builder.build(syntax.node, 0);
  return builder.problems.length > 0
    ? { ok: false, problems: builder.problems }
    : { ok: true, expression, places: builder.places };
}

function syntaxProblem(text: string, found: { offset: number; description: string }): ExpressionProblem {
  if (text.slice(found.offset - 1, found.offset + 1) === "**")
    return { offset: found.offset - 1, message: "operator '**' is not allowed; write ^ for a power", suggestion: "^" };
  const given = found.offset < text.length ? `at '${text.slice(found.offset, found.offset + 12)}'` : "at its end";
  return {
    offset: found.offset,
    message: `the expression cannot be read ${given} (${found.description}); allowed are numbers, names, + - * / ^, parentheses and ${FUNCTIONS.join(", ")}`,
  };
}

const BINARY: Readonly<Record<string, "add" | "subtract" | "multiply" | "divide">> = {
  "+": "add",
  "-": "subtract",
  "*": "multiply",
  "/": "divide",
};

const REFUSED: Readonly<Record<string, string>> = {
  MemberExpression: "member access ('.' or '[ ]')",
  ConditionalExpression: "a conditional ('? :')",
  ArrayExpression: "an array",
  SequenceExpression: "a list in parentheses",
  ThisExpression: "'this'",
  Compound: "more than one expression (is an operator missing?)",
};

/** Stands for what could not be built, so that the remaining mistakes are still found. */
const UNKNOWN: Expression = constant(1);

class ExpressionBuilder {
  readonly problems: ExpressionProblem[] = [];
  readonly places = new Map<Expression, Place>();
  readonly #leaves: ReadonlyMap<string, () => Expression>;
  #isTooDeep = false;

  constructor(
    private readonly text: string,
    names: ExpressionNames,
  ) {
    this.#leaves = new Map<string, () => Expression>([
      ["pi", () => constant(Math.PI)],
      ...[...names.parameters].map(([name, value]) => [name, () => constant(value)] as const),
      ...names.states.map((name, index) => [name, (): Expression => ({ kind: "state", index })] as const),
      ...names.inputs.map((name, index) => [name, (): Expression => ({ kind: "input", index })] as const),
    ]);
  }

  build(node: SyntaxNode, depth: number): Expression {
    if (depth > MAX_DEPTH) {
      if (this.#isTooDeep) return UNKNOWN;
      this.#isTooDeep = true;
      return this.#refuse(node, `the expression is more than ${MAX_DEPTH} operations deep; shorten it`);
    }
    const built = this.#node(node, depth);
    if (built !== UNKNOWN) this.places.set(built, extentOf(node));
    return built;
  }

  #node(node: SyntaxNode, depth: number): Expression {
    const part = (key: string): Expression => this.build(node[key] as SyntaxNode, depth + 1);
    switch (node.type) {
      case "Literal":
        return this.#literal(node);
      case "Identifier":
        return this.#named(node, node.name as string);
      case "UnaryExpression": {
        const of = part("argument");
        return node.operator === "-" ? { kind: "negate", of } : of;
      }
      case "BinaryExpression": {
        const operator = node.operator as string;
        const kind = BINARY[operator];
        if (operator === "^") return this.#power(node, depth);
        if (kind === undefined)
          return this.#refuse(node, `operator '${operator}' is not allowed; allowed are + - * / ^`);
        return { kind, left: part("left"), right: part("right") };
      }
      case "CallExpression":
        return this.#call(node, depth);
      default: {
        const isEmpty = node.type === "Compound" && (node.body as SyntaxNode[]).length === 0;
        const what = isEmpty ? "nothing in parentheses" : (REFUSED[node.type] ?? `'${this.#textOf(node)}'`);
        return this.#refuse(
          this.#firstExtra(node),
          `${what} is not allowed in a rate expression; write one formula of numbers, names, + - * / ^ and ${FUNCTIONS.join(", ")}`,
        );
      }
    }
  }

  /** Of two formulas side by side the second is the one too many. */
  #firstExtra(node: SyntaxNode): SyntaxNode {
    return node.type === "Compound" ? ((node.body as SyntaxNode[])[1] ?? node) : node;
  }

  #literal(node: SyntaxNode): Expression {
    const value = node.value;
    if (typeof value !== "number")
      return this.#refuse(node, `text ${this.#textOf(node)} is not allowed; write a number or a name`);
    if (!Number.isFinite(value))
      return this.#refuse(
        node,
        `the number ${this.#textOf(node)} is too large for float64; allowed are finite numbers`,
      );
    return constant(value);
  }

  #named(node: SyntaxNode, name: string): Expression {
    const leaf = this.#leaves.get(name);
    if (leaf !== undefined) return leaf();
    if ((FUNCTIONS as readonly string[]).includes(name))
      return this.#refuse(node, `function '${name}' needs its argument in parentheses: ${name}(...)`);
    return this.#refuse(
      node,
      `unknown name '${name}'; allowed here are ${[...this.#leaves.keys()].join(", ")}`,
      nearestName(name, this.#leaves.keys()),
    );
  }

  #power(node: SyntaxNode, depth: number): Expression {
    const exponentNode = node.right as SyntaxNode;
    const base = this.build(node.left as SyntaxNode, depth + 1);
    const before = this.problems.length;
    const exponent = this.build(exponentNode, depth + 1);
    if (this.problems.length > before) return UNKNOWN;
    if (mentions(exponent, "state") || mentions(exponent, "input"))
      return this.#refuse(
        exponentNode,
        `exponent '${this.#textOf(exponentNode)}' is not constant; allowed are numbers and parameters: write exp(... * log(...)) for a varying one`,
      );
    const value = evaluateExpression(exponent, [], []);
    if (!Number.isFinite(value))
      return this.#refuse(
        exponentNode,
        `exponent '${this.#textOf(exponentNode)}' is ${value}; allowed are finite numbers`,
      );
    return { kind: "power", base, exponent: value };
  }

  #call(node: SyntaxNode, depth: number): Expression {
    const callee = node.callee as SyntaxNode;
    const given = node.arguments as SyntaxNode[];
    const name = callee.type === "Identifier" ? (callee.name as string) : null;
    if (name === null)
      return this.#refuse(
        node,
        `only a function's name can be called, got '${this.#textOf(node)}'; allowed are ${FUNCTIONS.join(", ")}`,
      );
    if (!isFunctionName(name)) {
      const hint = this.#leaves.has(name) ? ` ('${name}' is no function: write * to multiply)` : "";
      return this.#refuse(
        node,
        `unknown function '${name}'${hint}; allowed are ${FUNCTIONS.join(", ")}`,
        nearestName(name, FUNCTIONS),
      );
    }
    const args = given.map((arg) => this.build(arg, depth + 1));
    const wanted = name === "atan2" ? 2 : 1;
    if (args.length !== wanted)
      return this.#refuse(node, `${name} takes ${wanted} argument${wanted > 1 ? "s (y, x)" : ""}, got ${args.length}`);
    return { kind: "call", name, args };
  }

  #refuse(node: SyntaxNode, message: string, suggestion: string | null = null): Expression {
    const { start } = extentOf(node);
    this.problems.push({ offset: start, message, ...(suggestion === null ? {} : { suggestion }) });
    return UNKNOWN;
  }

  #textOf(node: SyntaxNode): string {
    const { start, end } = extentOf(node);
    return this.text.slice(start, end).trim();
  }
}

function isFunctionName(name: string): name is FunctionName {
  return (FUNCTIONS as readonly string[]).includes(name);
}
