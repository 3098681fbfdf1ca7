import fc from "fast-check";
import { describe, expect, it } from "vitest";
import { evaluateExpression } from "../../src/plant/evaluateExpression.js";
import { MAX_LENGTH, parseExpression } from "../../src/plant/parseExpression.js";

const names = {
  states: ["x", "y", "speed"],
  inputs: ["push"],
  parameters: new Map([
    ["k", 3],
    ["half", 0.5],
  ]),
};
const X = [2, 5, 7];
const U = [0.25];

function valueOfText(text: string): number {
  const parsed = parseExpression(text, names);
  if (!parsed.ok) throw new Error(parsed.problems.map(({ message }) => message).join("; "));
  return evaluateExpression(parsed.expression, X, U);
}

function firstProblem(text: string): { offset: number; message: string; suggestion?: string } {
  const parsed = parseExpression(text, names);
  if (parsed.ok) throw new Error(`'${text}' was accepted`);
  return parsed.problems[0]!;
}

describe("precedence", () => {
  it.each([
    ["1 - 2 - 3", -4],
    ["1 - 2 * 3", -5],
    ["8 / 4 / 2", 1],
    ["8 / 4 * 2", 4],
    ["-x^2", -4],
    ["(-x)^2", 4],
    ["2^3^2", 512],
    ["(2^3)^2", 64],
    ["2^-2", 0.25],
    ["2^-2^2", 0.0625],
    ["2 * -3", -6],
    ["2 - -3", 5],
    ["--x", 2],
    ["+x", 2],
    ["-2^2 + 1", -3],
    ["x^2 * y", 20],
    ["y * x^2", 20],
    ["sin(x)^2 + cos(x)^2", 1],
    ["x^(k - 1)", 4],
    ["x^half", Math.SQRT2],
    ["(x + y) * (-k)", -21],
    ["atan2(1, -1) / pi", 0.75],
    ["abs(-y)", 5],
    [".5e1 + 1E-1", 5.1],
    ["  x\n  + y\t", 7],
    ["push * 4", 1],
  ])("%s = %d", (text, wanted) => {
    expect(valueOfText(text)).toBeCloseTo(wanted, 14);
  });

  it("agrees with JavaScript on random chains of operators", () => {
    const operand = fc.constantFrom("x", "y", "k", "2", "0.5", "(x - k)", "sin(y)");
    const link = fc.tuple(fc.constantFrom("+", "-", "*", "/"), operand);
    const chain = fc.tuple(operand, fc.array(link, { minLength: 1, maxLength: 8 }));
    fc.assert(
      fc.property(chain, fc.constantFrom("", "^2", "^3^half"), ([head, links], exponent) => {
        const text = head + links.map(([operator, right]) => ` ${operator} ${right}${exponent}`).join("");
        const asJavaScript = new Function(
          "x",
          "y",
          "k",
          "half",
          `return ${text.replaceAll("^", "**").replaceAll("sin", "Math.sin")}`,
        ) as (...values: number[]) => number;
        expect(valueOfText(text)).toBe(asJavaScript(2, 5, 3, 0.5));
      }),
    );
  });
});

describe("what is refused", () => {
  it.each([
    ["x.constructor", 0, /member access/],
    ["y + x.constructor.constructor", 4, /member access/],
    ["x['constructor']", 0, /member access/],
    ["x[0]", 0, /member access/],
    ["sin.constructor('return 1')()", 0, /only a function's name can be called/],
    ["constructor", 0, /unknown name 'constructor'/],
    ["__proto__", 0, /unknown name '__proto__'/],
    ["toString()", 0, /unknown function 'toString'/],
    ["hasOwnProperty(x)", 0, /unknown function/],
    ["process.exit(1)", 0, /only a function's name/],
    ["globalThis", 0, /unknown name/],
    ["eval(x)", 0, /unknown function 'eval'/],
    ["this", 0, /'this' is not allowed/],
    // biome-ignore lint/suspicious/noTemplateCurlyInString: the text of a template string is what is tried
    ["`${x}`", 0, /cannot be read/],
    ["x ? 1 : 2", 0, /a conditional/],
    ["1 + (x ? y : 2)", 4, /a conditional/],
    ["[x, y]", 0, /an array/],
    ["'x'", 0, /text 'x' is not allowed/],
    ['x + "y"', 4, /text "y" is not allowed/],
    ["x < 1", 2, /cannot be read/],
    ["x == y", 2, /cannot be read/],
    ["x = 1", 2, /cannot be read/],
    ["x && y", 2, /cannot be read/],
    ["x % 2", 2, /cannot be read/],
    ["!x", 0, /cannot be read/],
    ["x ** 2", 2, /write \^ for a power/],
    ["x y", 2, /more than one expression/],
    ["x; y", 3, /more than one expression/],
    ["x, y", 3, /more than one expression/],
    ["(x, y)", 0, /a list in parentheses/],
    ["()", 0, /nothing in parentheses/],
    ["", 0, /empty/],
    ["  ", 0, /empty/],
    ["(x", 2, /at its end/],
    ["x)", 1, /cannot be read at '\)'/],
    ["x +", 3, /at its end/],
    ["2^", 2, /at its end/],
    ["2x", 1, /cannot be read/],
    ["x(y)", 0, /'x' is no function: write \*/],
    ["(x + 1)(y)", 0, /only a function's name/],
    ["sin", 0, /needs its argument/],
    ["sin()", 0, /takes 1 argument, got 0/],
    ["sin(x, y)", 0, /takes 1 argument, got 2/],
    ["atan2(x)", 0, /takes 2 arguments \(y, x\), got 1/],
    ["sign(x)", 0, /unknown function 'sign'/],
    ["x^y", 2, /exponent 'y' is not constant/],
    ["x^(1 + push)", 2, /is not constant/],
    ["x^(1 / 0)", 2, /is Infinity/],
    ["1e999", 0, /too large/],
  ])("%s at %d", (text, offset, message) => {
    const problem = firstProblem(text);
    expect(problem.message).toMatch(message);
    expect(problem.offset).toBe(offset);
  });

  it("suggests the name that was probably meant", () => {
    expect(firstProblem("2 * sped")).toMatchObject({ offset: 4, suggestion: "speed" });
    expect(firstProblem("Speed")).toMatchObject({ suggestion: "speed" });
    expect(firstProblem("sqr(x)")).toMatchObject({ suggestion: "sqrt" });
    expect(firstProblem("banana")).not.toHaveProperty("suggestion");
  });

  it("reports every unknown name of one formula", () => {
    const parsed = parseExpression("a1 * x + b1 * sin(c1)", names);
    expect(parsed).toMatchObject({ ok: false, problems: [{ offset: 0 }, { offset: 9 }, { offset: 18 }] });
  });

  it("bounds length, nesting and depth without exhausting the stack", () => {
    expect(firstProblem(`x${" + x".repeat(MAX_LENGTH)}`).message).toMatch(/at most 2000/);
    expect(firstProblem(`${"(".repeat(990)}x${")".repeat(990)}`).message).toMatch(/nested more than 48/);
    expect(firstProblem("-".repeat(1900).concat("x")).message).toMatch(/nested more than 48/);
    expect(firstProblem("x^".repeat(900).concat("1")).message).toMatch(/nested more than 48/);
    expect(firstProblem(`x${"+x".repeat(400)}`).message).toMatch(/more than 200 operations deep/);
    expect(valueOfText(`x${"+x".repeat(150)}`)).toBe(302);
  });

  it("never throws and never runs text, whatever it is given", () => {
    const piece = fc.constantFrom(
      ..."x y push sin( ) ( , ^ - + * / . [ ] ' \" ` ? : ; { } 1 2e k $ _ = ! \\ é".split(" "),
    );
    const text = fc.oneof(
      fc.string({ maxLength: 40 }),
      fc.array(piece, { maxLength: 15 }).map((parts) => parts.join("")),
    );
    fc.assert(
      fc.property(text, (given) => {
        const parsed = parseExpression(given, names);
        if (parsed.ok) expect(typeof evaluateExpression(parsed.expression, X, U)).toBe("number");
        else for (const { offset } of parsed.problems) expect(offset >= 0 && offset <= given.length).toBe(true);
      }),
      { numRuns: 2000 },
    );
  });
});
