/**
 * Shows exactly that a declared planar rotation holds, from the formulas: with psi the heading and ' = d/dpsi,
 *   rates of the position pair (a, b):  f_a' = -f_b,  f_b' = f_a;   every other rate: f_i' = 0;
 * the same for each column of B and G. (The derivative of R(psi) g is S R(psi) g, and that equation has no other solution.)
 *
 * A formula is written as a polynomial in cos psi and sin psi whose coefficients are polynomials in atoms: other states,
 * and whole functions and quotients that are free of the heading, told apart by their text. sin^2 is replaced by
 * 1 - cos^2, so equal polynomials look equal. Coefficients are whole numbers, other constants are atoms: nothing is
 * rounded, and a formula that only rounds to a rotation is not one. What cannot be written so is not shown, and refused.
 */
import type { Expression } from "../../plant/expression.js";
import { mentionsState } from "../../plant/intervalRates.js";
import type { Plant } from "../../plant/plant.js";

/** Monomial -> coefficient; a monomial is its factors' names, sorted; the heading's are COS and SIN. */
type Polynomial = ReadonlyMap<string, number>;

const COS = "\u0001cos";
const SIN = "\u0001sin";
const JOIN = "\u0002";

/** Null when the rotation holds; else the rate or effect that does not turn. Throws nothing. */
export function rotationFault(plant: Plant): string | null {
  const { rotation } = plant.symmetry;
  if (rotation === null) return null;
  const { position, heading } = rotation;
  const [a, b] = position;
  const { f, B, G } = plant.expressions;
  const columns: [string, readonly Expression[]][] = [
    ["the rates at zero input", f],
    ...plant.inputs.map(({ name }, j): [string, readonly Expression[]] => [`input '${name}'`, B.map((row) => row[j]!)]),
    ...plant.leftover.map(({ name }, k): [string, readonly Expression[]] => [
      `leftover channel '${name}'`,
      G.map((row) => row[k]!),
    ]),
  ];
  for (const [what, column] of columns) {
    const polynomials = column.map((e) => polynomialOf(e, heading));
    for (const [i, polynomial] of polynomials.entries()) {
      const name = plant.states[i]!.name;
      if (polynomial === null)
        return `${what} on '${name}': the heading occurs in a way that is not a polynomial in its sine and cosine`;
      const other = i === a ? polynomials[b] : i === b ? polynomials[a] : new Map<string, number>();
      if (other === null || other === undefined) return `${what}: the position rates cannot be compared`;
      const rest = sum(headingDerivative(polynomial), other, i === a ? 1 : -1);
      if (rest.size > 0) return `${what} on '${name}' does not turn with the heading`;
    }
  }
  return null;
}

function sum(p: Polynomial, q: Polynomial, factor: number): Polynomial {
  const out = new Map(p);
  for (const [monomial, c] of q) {
    const total = (out.get(monomial) ?? 0) + factor * c;
    if (total === 0) out.delete(monomial);
    else out.set(monomial, total);
  }
  return out;
}

function product(p: Polynomial, q: Polynomial): Polynomial {
  let out: Polynomial = new Map();
  for (const [m, c] of p) {
    for (const [k, d] of q) {
      const factors = [...factorsOf(m), ...factorsOf(k)].sort();
      out = sum(out, reduced(factors, c * d), 1);
    }
  }
  return out;
}

function factorsOf(monomial: string): string[] {
  return monomial === "" ? [] : monomial.split(JOIN);
}

/** sin^2 -> 1 - cos^2 until at most one sine is left. */
function reduced(factors: readonly string[], c: number): Polynomial {
  const first = factors.indexOf(SIN);
  const second = factors.indexOf(SIN, first + 1);
  if (first < 0 || second < 0) return new Map(c === 0 ? [] : [[factors.join(JOIN), c]]);
  const rest = factors.filter((_, i) => i !== first && i !== second);
  return sum(reduced(rest, c), reduced([...rest, COS, COS].sort(), c), -1);
}

/** cos' = -sin, sin' = cos, by the product rule. */
function headingDerivative(p: Polynomial): Polynomial {
  let out: Polynomial = new Map();
  for (const [monomial, c] of p) {
    const factors = factorsOf(monomial);
    factors.forEach((factor, i) => {
      if (factor !== COS && factor !== SIN) return;
      const turned = factors.map((other, k) => (k === i ? (factor === COS ? SIN : COS) : other)).sort();
      out = sum(out, reduced(turned, factor === COS ? -c : c), 1);
    });
  }
  return out;
}

function polynomialOf(e: Expression, heading: number): Polynomial | null {
  const both = (left: Expression, right: Expression, join: (p: Polynomial, q: Polynomial) => Polynomial) => {
    const [p, q] = [polynomialOf(left, heading), polynomialOf(right, heading)];
    return p === null || q === null ? null : join(p, q);
  };
  const atom = (): Polynomial | null => (mentionsState(e, heading) ? null : new Map([[JSON.stringify(e), 1]]));
  switch (e.kind) {
    case "constant":
      if (e.value === 0) return new Map();
      return Number.isSafeInteger(e.value) ? new Map([["", e.value]]) : atom();
    case "negate": {
      const p = polynomialOf(e.of, heading);
      return p === null ? null : sum(new Map(), p, -1);
    }
    case "add":
      return both(e.left, e.right, (p, q) => sum(p, q, 1));
    case "subtract":
      return both(e.left, e.right, (p, q) => sum(p, q, -1));
    case "multiply":
      return both(e.left, e.right, product);
    case "divide": {
      if (mentionsState(e.right, heading)) return null;
      const inverse: Expression = { kind: "power", base: e.right, exponent: -1 };
      const p = polynomialOf(e.left, heading);
      return p === null ? null : product(p, new Map([[JSON.stringify(inverse), 1]]));
    }
    case "power": {
      if (!mentionsState(e, heading)) return atom();
      if (!Number.isInteger(e.exponent) || e.exponent < 1 || e.exponent > 8) return null;
      const p = polynomialOf(e.base, heading);
      let out = p;
      for (let k = 1; k < e.exponent && out !== null && p !== null; k++) out = product(out, p);
      return out;
    }
    case "call": {
      const [arg] = e.args;
      const isHeading = arg?.kind === "state" && arg.index === heading;
      if (isHeading && (e.name === "cos" || e.name === "sin")) return new Map([[e.name === "cos" ? COS : SIN, 1]]);
      return atom();
    }
    default:
      return atom();
  }
}
