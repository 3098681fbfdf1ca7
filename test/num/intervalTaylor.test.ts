import { Decimal } from "decimal.js";
import { describe, expect, it } from "vitest";
import { mlpNodes } from "../../src/nets/intervalMlp.js";
import { type Random, seededRandom } from "../../src/num/random.js";
import { newExpansion, powerExpansion, type SmoothFunction } from "../../src/num/taylorFunctions.js";
import { type Node, SMOOTH, type TaylorEvaluator, taylorGraph, ZERO } from "../../src/num/taylorGraph.js";
import { type TaylorKernel, taylorKernel } from "../../src/num/taylorModel.js";
import { randomMlp } from "../support/randomSystem.js";
import { Big, big } from "./intervalTruth.js";

const TRUTH: Record<string, { f: SmoothFunction; truth: (x: Big) => Big; from: number; to: number }> = {
  sin: { f: SMOOTH.sin, truth: (x) => Big.sin(x), from: -10, to: 10 },
  cos: { f: SMOOTH.cos, truth: (x) => Big.cos(x), from: -10, to: 10 },
  tan: { f: SMOOTH.tan, truth: (x) => Big.tan(x), from: -1, to: 1 },
  tanh: { f: SMOOTH.tanh, truth: (x) => Big.tanh(x), from: -6, to: 6 },
  tanhSlope: { f: SMOOTH.tanhSlope, truth: (x) => new Big(1).minus(Big.tanh(x).pow(2)), from: -6, to: 6 },
  exp: { f: SMOOTH.exp, truth: (x) => Big.exp(x), from: -5, to: 5 },
  log: { f: SMOOTH.log, truth: (x) => Big.ln(x), from: 0.6, to: 50 },
  sqrt: { f: SMOOTH.sqrt, truth: (x) => Big.sqrt(x), from: 0.6, to: 50 },
  abs: { f: SMOOTH.abs, truth: (x) => x.abs(), from: -1, to: 1 },
  atan: { f: SMOOTH.atan, truth: (x) => Big.atan(x), from: -5, to: 5 },
  reciprocal: { f: SMOOTH.reciprocal, truth: (x) => new Big(1).div(x), from: 0.6, to: 9 },
  "power 3": { f: powerExpansion(3), truth: (x) => x.pow(3), from: -3, to: 3 },
  "power -2": { f: powerExpansion(-2), truth: (x) => x.pow(-2), from: 0.6, to: 5 },
  "power 2.5": { f: powerExpansion(2.5), truth: (x) => x.pow(2.5), from: 0.6, to: 5 },
};

describe("expansions hold the 40-digit truth", () => {
  for (const [name, { f, truth, from, to }] of Object.entries(TRUTH)) {
    it(name, () => {
      const random = seededRandom(3);
      const phi = newExpansion();
      let tightest = Number.POSITIVE_INFINITY;
      for (let i = 0; i < 250; i++) {
        const c = from + random.uniform() * (to - from);
        const spread = 0.5 * 2 ** -random.integer(30);
        f(c, spread, phi);
        for (const s of [-spread, spread, (2 * random.uniform() - 1) * spread]) {
          const at = big(s);
          const poly = big(phi.value)
            .plus(at.times(big(phi.slope)))
            .plus(at.pow(2).times(big(phi.half)))
            .plus(at.pow(3).times(big(phi.third)).div(6));
          const a = Math.abs(s);
          const bound = phi.valueError + phi.slopeError * a + phi.halfError * a * a + (phi.thirdError * a * a * a) / 6;
          const off = truth(big(c).plus(at)).minus(poly).abs();
          expect(off.lte(big(bound).times(1 + 1e-12)), `${name}(${c} + ${s}): off by ${off}, bound ${bound}`).toBe(
            true,
          );
          tightest = Math.min(tightest, bound / (1e-18 + off.toNumber()));
        }
      }
      // a bound that is never within 1000 times of what happens would be of no use
      expect(tightest).toBeLessThan(1000);
    });
  }
});

/** All nodes of a run hold f at random points of the cell. */
function expectEnclosed(
  evaluator: TaylorEvaluator,
  node: Node,
  f: (x: number[]) => number,
  centre: number[],
  radius: number[],
  random: Random,
): void {
  const { kernel, M } = evaluator;
  evaluator.run(Float64Array.from(centre), Float64Array.from(radius));
  const o = node === ZERO ? 0 : evaluator.at(node);
  for (let trial = 0; trial < 12; trial++) {
    const t = centre.map(() => (trial < 4 ? (random.uniform() < 0.5 ? -1 : 1) : 2 * random.uniform() - 1));
    const x = centre.map((c, i) => c + radius[i]! * t[i]!);
    let value = M[o]!;
    evaluator.used.forEach((index, i) => {
      value += M[o + 1 + i]! * t[index]!;
      evaluator.used.forEach((other, j) => {
        if (j >= i) value += M[o + kernel.quadratic(i, j)]! * t[index]! * t[other]!;
      });
    });
    const truth = f(x);
    // float64 evaluation of both sides is off by a few units in the last place of their terms
    const slack = 1e-13 * (1 + Math.abs(truth));
    expect(Math.abs(truth - value)).toBeLessThanOrEqual(M[o + kernel.size - 1]! + slack);
    expect(truth).toBeLessThanOrEqual(kernel.upper(M, o) + slack);
    expect(truth).toBeGreaterThanOrEqual(kernel.lower(M, o) - slack);
  }
}

describe("rounding", () => {
  // exact polynomials of the coefficients at t, with 120 digits: what is left over must stay within e
  const Exact = Decimal.clone({ precision: 120, minE: -2000, maxE: 2000 });
  const exact = (x: number) => big(x, Exact);
  const valueAt = (M: Float64Array, o: number, t: number[], kernel: TaylorKernel): Big => {
    let sum = exact(M[o]!);
    t.forEach((ti, i) => {
      sum = sum.plus(exact(M[o + 1 + i]!).times(exact(ti)));
      for (let j = i; j < t.length; j++)
        sum = sum.plus(
          exact(M[o + kernel.quadratic(i, j)]!)
            .times(exact(ti))
            .times(exact(t[j]!)),
        );
    });
    return sum;
  };
  it("of sums and products is inside the remainder", () => {
    const random = seededRandom(6);
    for (const d of [0, 1, 2]) {
      const kernel = taylorKernel(d);
      const { size } = kernel;
      for (let trial = 0; trial < 400; trial++) {
        const M = new Float64Array(4 * size);
        // cubic and quartic terms are dropped by design: keep quadratic parts tiny so that rounding is what is seen
        for (let a = 0; a < 2; a++) {
          for (let k = 0; k < size - 1; k++)
            M[a * size + k] = random.normal() * 10 ** (3 * random.normal()) * (k > d ? 1e-18 : 1);
        }
        const w = random.normal();
        kernel.product(M, 0, size, 2 * size);
        kernel.sum(
          M,
          {
            constant: w,
            linear: [
              { weight: -w, of: 0 },
              { weight: 0.1, of: size },
            ],
            products: [{ weight: w, left: 0, right: size }],
          },
          3 * size,
        );
        const t = Array.from({ length: d }, () => (random.uniform() < 0.5 ? 1 : 2 * random.uniform() - 1));
        const [a, b] = [valueAt(M, 0, t, kernel), valueAt(M, size, t, kernel)];
        const product = a.times(b);
        const combination = exact(w).minus(exact(w).times(a)).plus(exact(0.1).times(b)).plus(exact(w).times(product));
        for (const [o, truth] of [
          [2 * size, product],
          [3 * size, combination],
        ] as const) {
          const off = truth.minus(valueAt(M, o, t, kernel)).abs();
          expect(off.lte(exact(M[o + size - 1]!)), `off by ${off} of ${M[o + size - 1]}`).toBe(true);
          expect(off.lte(exact(kernel.spread(M, o)).plus(truth.minus(exact(M[o]!)).abs()))).toBe(true);
          expect(truth.lte(exact(kernel.upper(M, o)))).toBe(true);
          expect(truth.gte(exact(kernel.lower(M, o)))).toBe(true);
        }
      }
    }
  });
  it("of a network with its tangent is inside the remainder", () => {
    const random = seededRandom(12);
    for (let trial = 0; trial < 25; trial++) {
      const mlp = randomMlp(random, [2, 4, 4, 2], 1.5);
      const graph = taylorGraph(2);
      const inputs = [graph.variable(0), graph.variable(1)];
      const net = mlpNodes(graph, mlp, inputs, [[graph.constant(1), ZERO]]);
      const evaluator = graph.evaluator("points");
      const x = [random.normal(), random.normal()];
      evaluator.run(Float64Array.from(x), new Float64Array(2));
      let values = x.map((v) => exact(v));
      let slopes = [exact(1), exact(0)];
      mlp.layers.forEach(({ weights, bias }, l) => {
        const dot = (row: readonly number[], v: Big[]): Big =>
          row.reduce((sum, w, j) => sum.plus(exact(w).times(v[j]!)), exact(0));
        const next = weights.map((row, i) => dot(row, values).plus(exact(bias[i]!)));
        const nextSlopes = weights.map((row) => dot(row, slopes));
        const isLast = l === mlp.layers.length - 1;
        values = next.map((v) => (isLast ? v : exact(0).plus(Big.tanh(v))));
        slopes = nextSlopes.map((v, i) => (isLast ? v : v.times(exact(1).minus(values[i]!.pow(2)))));
      });
      for (const [i, [node, truth]] of [
        ...net.values.map((node, i) => [node, values[i]!] as const),
        ...net.tangents[0]!.map((node, i) => [node, slopes[i]!] as const),
      ].entries()) {
        const o = evaluator.at(node);
        const off = truth.minus(exact(evaluator.M[o]!)).abs();
        expect(off.lte(exact(evaluator.M[o + 1]!)), `output ${i}: off by ${off} of ${evaluator.M[o + 1]}`).toBe(true);
        expect(evaluator.M[o + 1]!).toBeLessThan(1e-10);
      }
    }
  });
});

describe("graphs", () => {
  it("hold sums, products, quotients, powers and functions of several variables", () => {
    const random = seededRandom(4);
    const graph = taylorGraph(3);
    const [x, y, z] = [0, 1, 2].map(graph.variable) as [Node, Node, Node];
    const cases: [Node, (v: number[]) => number][] = [
      [
        graph.sum(
          [
            { weight: 3, left: x },
            { weight: -0.1, left: y, right: z },
          ],
          0.7,
        ),
        ([a, b, c]) => 3 * a! - 0.1 * b! * c! + 0.7,
      ],
      [graph.product(graph.product(x, y), graph.product(y, z)), ([a, b, c]) => a! * b! * b! * c!],
      [graph.quotient(x, graph.sum([{ weight: 1, left: y, right: y }], 2)), ([a, b]) => a! / (b! * b! + 2)],
      [graph.power(graph.sum([{ weight: 1, left: x }], 3), 1.5), ([a]) => (a! + 3) ** 1.5],
      [graph.power(y, 5), ([, b]) => b! ** 5],
      [
        graph.apply(
          "tanh",
          graph.sum([
            { weight: 2, left: x },
            { weight: -1, left: z },
          ]),
        ),
        ([a, , c]) => Math.tanh(2 * a! - c!),
      ],
      [
        graph.apply(
          "abs",
          graph.sum([
            { weight: 1, left: x },
            { weight: 1, left: y },
          ]),
        ),
        ([a, b]) => Math.abs(a! + b!),
      ],
      [graph.atan2(graph.sum([{ weight: 1, left: x }], 2), y), ([a, b]) => Math.atan2(a! + 2, b!)],
      [graph.atan2(graph.sum([{ weight: 1, left: x }], -2), y), ([a, b]) => Math.atan2(a! - 2, b!)],
      [graph.atan2(x, graph.sum([{ weight: 1, left: z }], 2)), ([a, , c]) => Math.atan2(a!, c! + 2)],
      [graph.apply("exp", graph.apply("sin", graph.product(x, z))), ([a, , c]) => Math.exp(Math.sin(a! * c!))],
    ];
    const evaluator = graph.evaluator("cells");
    for (const [node, f] of cases) {
      for (let trial = 0; trial < 60; trial++) {
        const centre = [0, 0, 0].map(() => 1.2 * random.uniform() - 0.6);
        const radius = [0, 0, 0].map(() => 0.4 * 2 ** -random.integer(20));
        expectEnclosed(evaluator, node, f, centre, radius, random);
      }
    }
  });
  it("claim nothing where the angle jumps or a divisor holds zero", () => {
    const graph = taylorGraph(2);
    const [x, y] = [graph.variable(0), graph.variable(1)];
    const angle = graph.atan2(y, x);
    const inverse = graph.quotient(y, x);
    const evaluator = graph.evaluator("cells");
    evaluator.run(Float64Array.of(-1, 0), Float64Array.of(0.1, 0.1));
    expect(evaluator.kernel.upper(evaluator.M, evaluator.at(angle))).toBe(Number.POSITIVE_INFINITY);
    evaluator.run(Float64Array.of(0, 0.5), Float64Array.of(0.1, 0.1));
    expect(evaluator.kernel.upper(evaluator.M, evaluator.at(inverse)) < 1e300).toBe(false);
  });
  it("shrinks with the third power of the cell", () => {
    const graph = taylorGraph(2);
    const node = graph.apply(
      "tanh",
      graph.sum([
        { weight: 1, left: graph.variable(0) },
        { weight: 2, left: graph.variable(1) },
      ]),
    );
    const evaluator = graph.evaluator("cells");
    const remainder = (radius: number): number => {
      evaluator.run(Float64Array.of(0.1, 0), Float64Array.of(radius, radius));
      return evaluator.M[evaluator.at(node) + evaluator.kernel.size - 1]!;
    };
    expect(Math.log2(remainder(0.02) / remainder(0.01))).toBeCloseTo(3, 0);
  });
});
