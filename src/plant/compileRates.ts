/**
 * RateExpressions -> CompiledRates: one straight-line JavaScript function, generated once, that writes f, B, G and their
 * exact derivatives; every common subexpression is computed once.
 *
 * Why generating code is safe here: the source is assembled from a checked tree only, out of float64 literals, reads
 * x[i] and writes to five arrays at integer indices, the operators + - * / and the Math functions of MATH. No character
 * of a plant file reaches it: names were turned into indices by the parser, and anything else is refused below.
 */
import { differentiate } from "./differentiate.js";
import type { Expression, FunctionName } from "./expression.js";
import type { CompiledRates, RateExpressions, RatesPoint } from "./plant.js";
import { isConstant } from "./simplify.js";

const MATH: Readonly<Record<FunctionName, string>> = {
  sin: "Math.sin",
  cos: "Math.cos",
  tan: "Math.tan",
  tanh: "Math.tanh",
  exp: "Math.exp",
  log: "Math.log",
  sqrt: "Math.sqrt",
  abs: "Math.abs",
  atan2: "Math.atan2",
  sign: "Math.sign",
};

const OPERATOR = { add: "+", subtract: "-", multiply: "*", divide: "/" } as const;

/** f: n, B: n x m, G: n x p; free of inputs. A constant that is not finite or an index outside the states throws. */
export function compileRates(expressions: RateExpressions): CompiledRates {
  const source = ratesSource(expressions);
  const run = new Function("x", "f", "B", "G", "dfdx", "dBdx", source) as (
    x: Float64Array,
    ...out: Float64Array[]
  ) => void;
  return {
    evaluate(x: Float64Array, out: RatesPoint): void {
      run(x, out.f, out.B, out.G, out.dfdx, out.dBdx);
    },
  };
}

/** Body of the generated function. */
export function ratesSource({ f, B, G }: RateExpressions): string {
  const n = f.length;
  const m = B[0]?.length ?? 0;
  const p = G[0]?.length ?? 0;
  const code = new StraightLineCode(n);
  const stateIndices = f.map((_, i) => i);
  f.forEach((rate, i) => {
    code.store("f", i, rate);
    for (const k of stateIndices) code.store("dfdx", i * n + k, differentiate(rate, { kind: "state", index: k }));
    B[i]!.forEach((gain, j) => {
      code.store("B", i * m + j, gain);
      for (const k of stateIndices)
        code.store("dBdx", (j * n + i) * n + k, differentiate(gain, { kind: "state", index: k }));
    });
    G[i]!.forEach((effect, k) => {
      code.store("G", i * p + k, effect);
    });
  });
  return code.text();
}

/** Value numbering: a right-hand side written before is not written again (Aho et al., "Compilers", 2nd ed., 6.1.2). */
class StraightLineCode {
  readonly #lines: string[] = [];
  readonly #names = new Map<string, string>();

  constructor(private readonly n: number) {}

  store(array: keyof RatesPoint, index: number, e: Expression): void {
    this.#lines.push(`${array}[${index}] = ${isConstant(e, 0) ? "0" : this.#operand(e)};`);
  }

  text(): string {
    return `"use strict";\n${this.#lines.join("\n")}\n`;
  }

  #operand(e: Expression): string {
    switch (e.kind) {
      case "constant":
        return literal(e.value);
      case "state":
        if (!Number.isInteger(e.index) || e.index < 0 || e.index >= this.n)
          throw new Error(`a compiled rate reads state ${e.index}; allowed are 0 to ${this.n - 1}`);
        return this.#named(`x[${e.index}]`);
      case "input":
        throw new Error("a compiled rate holds an input; split it into f and B first (splitAffine)");
      case "negate":
        return this.#named(`-${this.#operand(e.of)}`);
      case "power": {
        const base = this.#operand(e.base);
        return this.#named(e.exponent === 2 ? `${base} * ${base}` : `Math.pow(${base}, ${literal(e.exponent)})`);
      }
      case "call":
        return this.#named(`${MATH[e.name]}(${e.args.map((arg) => this.#operand(arg)).join(", ")})`);
      default:
        return this.#named(`${this.#operand(e.left)} ${OPERATOR[e.kind]} ${this.#operand(e.right)}`);
    }
  }

  #named(value: string): string {
    const known = this.#names.get(value);
    if (known !== undefined) return known;
    const name = `t${this.#names.size}`;
    this.#names.set(value, name);
    this.#lines.push(`const ${name} = ${value};`);
    return name;
  }
}

/** Shortest decimal that reads back as the same float64 (ECMA-262, Number::toString), in parentheses if negative. */
function literal(value: number): string {
  if (typeof value !== "number" || !Number.isFinite(value))
    throw new Error(`a compiled rate holds the constant ${value}; allowed are finite numbers`);
  return value < 0 || Object.is(value, -0) ? `(-${Math.abs(value)})` : `${value}`;
}
