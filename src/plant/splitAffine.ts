/**
 * Splits a rate that is affine in the inputs, g(x, u) = f(x) + sum_j B_j(x) u_j: f = g at u = 0, B_j = dg/du_j.
 * Affine is decided on the tree: no product of two parts that both hold an input, none in a denominator, under a power
 * or inside a function.
 */
import { differentiate } from "./differentiate.js";
import { mentions, partsOf } from "./evaluateExpression.js";
import type { Expression } from "./expression.js";
import { rebuild, ZERO } from "./simplify.js";

export type AffineSplit =
  | { readonly ok: true; readonly f: Expression; readonly B: readonly Expression[] }
  /** `term` is the smallest part of the expression that is not affine. */
  | { readonly ok: false; readonly term: Expression; readonly reason: string };

/** m: number of inputs. */
export function splitAffine(e: Expression, m: number): AffineSplit {
  const offence = firstOffence(e);
  if (offence !== null) return { ok: false, ...offence };
  const f = rebuild(e, (leaf) => (leaf.kind === "input" ? ZERO : leaf));
  const B = Array.from({ length: m }, (_, index) => differentiate(e, { kind: "input", index }));
  return { ok: true, f, B: B.map((b) => rebuild(b, (leaf) => leaf)) };
}

function firstOffence(e: Expression): { term: Expression; reason: string } | null {
  for (const part of partsOf(e)) {
    const inner = firstOffence(part);
    if (inner !== null) return inner;
  }
  const holds = (part: Expression): boolean => mentions(part, "input");
  switch (e.kind) {
    case "multiply":
      return holds(e.left) && holds(e.right) ? { term: e, reason: "two parts with inputs are multiplied" } : null;
    case "divide":
      return holds(e.right) ? { term: e, reason: "an input stands in a denominator" } : null;
    case "power":
      return holds(e.base) ? { term: e, reason: "an input stands under a power" } : null;
    case "call":
      return e.args.some(holds) ? { term: e, reason: `an input stands inside ${e.name}` } : null;
    default:
      return null;
  }
}
