// Truth: the formula's text run by JavaScript itself for values, central differences for derivatives.
import fc from "fast-check";
import { describe, expect, it } from "vitest";
import { compileRates, ratesSource } from "../../src/plant/compileRates.js";
import { differentiate } from "../../src/plant/differentiate.js";
import { evaluateExpression } from "../../src/plant/evaluateExpression.js";
import type { Expression } from "../../src/plant/expression.js";
import { parseExpression } from "../../src/plant/parseExpression.js";
import { newRatesPoint } from "../../src/plant/plant.js";
import { splitAffine } from "../../src/plant/splitAffine.js";

const names = { states: ["a", "b", "c"], inputs: ["u", "v"], parameters: new Map([["k", 0.3]]) };

function parse(text: string): Expression {
  const parsed = parseExpression(text, names);
  if (!parsed.ok) throw new Error(`${text}: ${parsed.problems[0]!.message}`);
  return parsed.expression;
}

/** Smooth at almost every point, without poles. */
const formula = fc.letrec<{ any: string }>((tie) => ({
  any: fc.oneof(
    { depthSize: "small", withCrossShrink: true },
    fc.constantFrom("a", "b", "c", "k", "2", "0.7", "pi"),
    fc
      .tuple(tie("any"), fc.constantFrom("+", "-", "*"), tie("any"))
      .map(([left, operator, right]) => `(${left} ${operator} ${right})`),
    tie("any").map((of) => `(-${of})`),
    fc
      .tuple(tie("any"), tie("any"))
      .map(([top, below]) => `${top} / (1.5 + ${below}^2)`)
      .map((t) => `(${t})`),
    fc.tuple(fc.constantFrom("sin", "cos", "tanh", "abs"), tie("any")).map(([name, of]) => `${name}(${of})`),
    tie("any").map((of) => `tan(tanh(${of}))`),
    tie("any").map((of) => `exp(sin(${of}))`),
    tie("any").map((of) => `log(1.2 + ${of}^2)`),
    tie("any").map((of) => `sqrt(1.2 + ${of}^2)`),
    fc
      .tuple(tie("any"), fc.constantFrom("2", "3", "(k + 0.4)", "-0.3", "0.3", "-2"))
      .map(([of, e]) => `(1.1 + cos(${of}))^${e}`)
      .map((t) => `(${t})`),
    tie("any").map((of) => `(tanh(${of})^3)`),
    fc.tuple(tie("any"), tie("any")).map(([y, x]) => `atan2(${y}, 1.5 + ${x}^2)`),
  ),
})).any;

const state = fc.tuple(...names.states.map(() => fc.double({ min: -1.5, max: 1.5, noNaN: true })));

function inJavaScript(text: string): (x: readonly number[], u: readonly number[]) => number {
  const body = text
    .replace(/\b(sin|cos|tanh|tan|exp|log|sqrt|abs|atan2)\(/g, "Math.$1(")
    .replaceAll("^", "**")
    .replace(/\bpi\b/g, "Math.PI");
  const run = new Function("a", "b", "c", "u", "v", "k", `return ${body}`) as (...values: number[]) => number;
  return (x, u) => run(...x, ...u, 0.3);
}

/** d g / d x_k by Richardson-extrapolated central differences; null at a kink, where the sides or step sizes disagree. */
function slope(g: (x: number[]) => number, x: readonly number[], k: number): number | null {
  const at = (shift: number): number => g(x.map((value, i) => (i === k ? value + shift : value)));
  const central = (h: number): number => (at(h) - at(-h)) / (2 * h);
  const [coarse, fine, finest] = [central(2e-3), central(1e-3), central(5e-4)];
  const first = (4 * fine - coarse) / 3;
  const second = (4 * finest - fine) / 3;
  const sides = Math.abs(at(1e-6) - 2 * at(0) + at(-1e-6)) / 1e-6;
  const allowed = 1 + Math.abs(second);
  return Math.abs(first - second) < 1e-6 * allowed && sides < 1e-5 * allowed ? second : null;
}

describe("compiled rates", () => {
  it("equal the formula and its central differences on random formulas", () => {
    let compared = 0;
    fc.assert(
      fc.property(formula, formula, formula, state, (free, alongU, alongV, x) => {
        const text = `${free} + u * ${alongU} - ${alongV} * (2 * v - u / 4)`;
        const split = splitAffine(parse(text), 2);
        if (!split.ok) throw new Error(split.reason);
        const zero: Expression = { kind: "constant", value: 0 };
        const rates = compileRates({
          f: [split.f, zero, zero],
          B: [split.B, [zero, zero], [zero, zero]],
          G: [[parse(alongU)], [zero], [zero]],
        });
        const out = newRatesPoint(3, 2, 1);
        rates.evaluate(Float64Array.from(x), out);
        const g = inJavaScript(text);
        const scale = 1e-11 * (1 + Math.abs(out.f[0]!) + Math.abs(out.B[0]!) + Math.abs(out.B[1]!));
        expect(Math.abs(out.f[0]! - g(x, [0, 0]))).toBeLessThan(scale);
        expect(Math.abs(out.f[0]! + 0.7 * out.B[0]! - 0.4 * out.B[1]! - g(x, [0.7, -0.4]))).toBeLessThan(scale);
        expect(out.G[0]!).toBeCloseTo(inJavaScript(alongU)(x, [0, 0]), 10);
        for (let k = 0; k < 3; k++) {
          const atRest = (at: number[]): number => g(at, [0, 0]);
          const pairs: [number, number | null][] = [
            [out.dfdx[k]!, slope(atRest, x, k)],
            [out.dBdx[k]!, slope((at) => g(at, [1, 0]) - g(at, [0, 0]), x, k)],
            [out.dBdx[9 + k]!, slope((at) => g(at, [0, 1]) - g(at, [0, 0]), x, k)],
          ];
          for (const [exact, difference] of pairs) {
            if (difference === null) continue;
            compared++;
            expect(Math.abs(exact - difference)).toBeLessThan(2e-5 * (1 + Math.abs(difference)));
          }
        }
        // rows without rates stay zero
        expect(out.dfdx.subarray(3).every((value) => value === 0)).toBe(true);
      }),
      { numRuns: 600 },
    );
    expect(compared).toBeGreaterThan(4000);
  });

  it("give closed forms of every function's derivative", () => {
    const at = [0.4, -0.6, 1.3];
    const cases: readonly (readonly [string, number])[] = [
      ["tan(a)", 1 / Math.cos(0.4) ** 2],
      ["tanh(a)", 1 / Math.cosh(0.4) ** 2],
      ["exp(2 * a)", 2 * Math.exp(0.8)],
      ["log(a)", 2.5],
      ["sqrt(a)", 0.5 / Math.sqrt(0.4)],
      ["abs(a - 1)", -1],
      ["atan2(a, c)", 1.3 / (0.16 + 1.69)],
      ["atan2(c, a)", -1.3 / (0.16 + 1.69)],
      ["a^0.3", 0.3 * 0.4 ** -0.7],
      ["a^-3", -3 * 0.4 ** -4],
      ["c / a", -1.3 / 0.16],
    ];
    for (const [text, wanted] of cases)
      expect(evaluateExpression(differentiate(parse(text), { kind: "state", index: 0 }), at, [])).toBeCloseTo(
        wanted,
        12,
      );
  });

  it("carry no rounding in their exponents", () => {
    const d = (text: string): Expression => differentiate(parse(text), { kind: "state", index: 0 });
    // 3 - 1 and 0.75 - 1 are float64 numbers, 0.3 - 1 is none: there a^0.3 / a stands for a^-0.7
    expect(d("a^3")).toMatchObject({ right: { kind: "power", exponent: 2 } });
    expect(d("a^0.75")).toMatchObject({ right: { kind: "power", exponent: -0.25 } });
    expect(d("a^0.3")).toMatchObject({ right: { kind: "divide", left: { kind: "power", exponent: 0.3 } } });
    // nor in sums of constants: the prover widens them itself
    expect(splitAffine(parse("a * (0.1 + 0.2)"), 0)).toMatchObject({ f: { right: { kind: "add" } } });
    expect(splitAffine(parse("a * (1 + 2)"), 0)).toMatchObject({ f: { left: { kind: "constant", value: 3 } } });
  });

  it("keep the damping term x |x| and its slope finite at rest", () => {
    const slopeAt = (text: string, a: number): number =>
      evaluateExpression(differentiate(parse(text), { kind: "state", index: 0 }), [a, 0, 0], []);
    for (const text of ["a * abs(a)", "abs(a) * a", "0.7 * a * abs(a)", "-k * a * abs(a)"]) {
      expect(slopeAt(text, 0)).toBeCloseTo(0, 15);
      const factor = text.startsWith("0.7") ? 0.7 : text.startsWith("-k") ? -0.3 : 1;
      expect(slopeAt(text, -2)).toBeCloseTo(4 * factor, 12);
    }
  });

  it("compute a common part once", () => {
    const e = parse("sin(a) * b + sin(a) * c");
    const source = ratesSource({ f: [e, e, e], B: [[], [], []], G: [[], [], []] });
    expect(source.match(/Math\.sin/g)).toHaveLength(1);
    expect(source.match(/Math\.cos/g)).toHaveLength(1);
  });

  it("refuse anything but numbers and states", () => {
    const compile = (e: unknown) => () => compileRates({ f: [e as Expression], B: [[]], G: [[]] });
    expect(compile({ kind: "constant", value: "0; process.exit(1)" })).toThrow(/finite numbers/);
    expect(compile({ kind: "constant", value: Number.NaN })).toThrow(/finite numbers/);
    expect(compile({ kind: "state", index: "0];process.exit(1);x[0" })).toThrow(/reads state/);
    expect(compile({ kind: "state", index: 1 })).toThrow(/reads state 1; allowed are 0 to 0/);
    expect(compile({ kind: "input", index: 0 })).toThrow(/splitAffine/);
    expect(compile({ kind: "power", base: { kind: "state", index: 0 }, exponent: "2)" })).toThrow(/finite numbers/);
  });
});

describe("splitting into f and B", () => {
  it.each([
    ["a * u * v", "a * u * v", /multiplied/],
    ["sin(b) + u^2", "u^2", /power/],
    ["u / (1 + v)", "u / (1 + v)", /denominator/],
    ["a + cos(b * u)", "cos(b * u)", /inside cos/],
    ["atan2(a, v)", "atan2(a, v)", /inside atan2/],
  ])("names the part of %s that is not affine", (text, part, reason) => {
    const parsed = parseExpression(text, names);
    if (!parsed.ok) throw new Error("unreadable");
    const split = splitAffine(parsed.expression, 2);
    if (split.ok) throw new Error("accepted");
    const { start, end } = parsed.places.get(split.term)!;
    expect(text.slice(start, end)).toBe(part);
    expect(split.reason).toMatch(reason);
  });

  it("leaves no input in f nor in B", () => {
    const split = splitAffine(parse("(a + u) * b / 2 - -(v - c) * sin(a)"), 2);
    if (!split.ok) throw new Error(split.reason);
    const x = [0.4, -0.6, 1.3];
    expect(evaluateExpression(split.f, x, [])).toBeCloseTo((0.4 * -0.6) / 2 - 1.3 * Math.sin(0.4), 14);
    expect(split.B.map((b) => evaluateExpression(b, x, []))).toEqual([-0.3, Math.sin(0.4)]);
  });
});
