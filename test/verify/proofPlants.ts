import type { ResidualFile } from "../../src/model/controlAffine.js";
import type { DualMetricFile } from "../../src/nets/dualMetric.js";
import type { MetricField } from "../../src/nets/intervalMetric.js";
import { type Node, ZERO } from "../../src/num/taylorGraph.js";
import { compileRates } from "../../src/plant/compileRates.js";
import { differentiate } from "../../src/plant/differentiate.js";
import type { Expression } from "../../src/plant/expression.js";
import { expressionNode } from "../../src/plant/intervalRates.js";
import { parseExpression } from "../../src/plant/parseExpression.js";
import type { Plant, RateExpressions, Symmetry } from "../../src/plant/plant.js";

const UNIT = { name: "1", factor: 1 };

export interface HandPlant {
  /** name: [min, max]. */
  readonly states: Readonly<Record<string, readonly [number, number]>>;
  readonly inputs?: Readonly<Record<string, readonly [number, number]>>;
  readonly f: readonly string[];
  /** [state][input]. */
  readonly B?: readonly (readonly string[])[];
  /** [state][channel]. */
  readonly G?: readonly (readonly string[])[];
  readonly symmetry?: Symmetry;
}

/** A plant from formulas in SI; logs and settings are stand-ins that no proof reads. */
export function handPlant(parts: HandPlant): Plant {
  const names = Object.keys(parts.states);
  const inputs = Object.keys(parts.inputs ?? {});
  const parse = (text: string): Expression => expressionOf(text, names);
  const B = parts.B ?? names.map(() => []);
  const G = parts.G ?? names.map((_, i) => [i === 0 ? "1" : "0"]);
  const expressions: RateExpressions = {
    f: parts.f.map(parse),
    B: B.map((row) => row.map(parse)),
    G: G.map((row) => row.map(parse)),
  };
  const spec = ([name, [min, max]]: [string, readonly [number, number]]) => ({
    name,
    unit: UNIT,
    min,
    max,
    isAngle: false,
  });
  return {
    name: "hand",
    description: "",
    states: Object.entries(parts.states).map(spec),
    inputs: Object.entries(parts.inputs ?? {}).map(spec),
    leftover: (expressions.G[0] ?? []).map((_, k) => ({ name: `w${k}`, unit: UNIT })),
    unknowns: [],
    symmetry: parts.symmetry ?? { translation: [], rotation: null },
    logs: { files: [], time: { column: "time", unit: UNIT }, run: null, states: [], inputs: [], maxGap: 1 },
    settings: {
      confidence: 0.9,
      split: { fit: 0.5, calibration: 0.3, test: 0.2 },
      window: null,
      unsupported: "refuse",
      goal: { kind: "state", state: 0 },
      roomLimit: 0.5,
      authorityLimit: 1,
      initialDistance: 0,
      rate: null,
      metricDependsOn: [],
      residualNet: { width: 8, steps: 1 },
      metricNet: { width: 8, steps: 1, rounds: 1 },
      seed: 1,
    },
    expressions,
    rates: compileRates(expressions),
  };
  function expressionOf(text: string, states: readonly string[]): Expression {
    const parsed = parseExpression(text, { states, inputs, parameters: new Map() });
    if (!parsed.ok) throw new Error(`${text}: ${parsed.problems[0]!.message}`);
    return parsed.expression;
  }
}

/** A metric given by formulas of the scaled states z0, z1, ..; each cell has to show that it is positive definite. */
export function formulaMetric(W: readonly (readonly string[])[]): MetricField {
  const n = W.length;
  const names = Array.from({ length: n }, (_, i) => `z${i}`);
  const entries = W.flat().map((text) => {
    const parsed = parseExpression(text, { states: names, inputs: [], parameters: new Map() });
    if (!parsed.ok) throw new Error(`${text}: ${parsed.problems[0]!.message}`);
    return parsed.expression;
  });
  return (graph, z) => {
    const node = (e: Expression): Node => expressionNode(graph, e, z);
    const slopes = names
      .map((_, state) => ({
        state,
        dW: entries.map((e) => node(differentiate(e, { kind: "state", index: state }))),
      }))
      .filter(({ dW }) => dW.some((entry) => entry !== ZERO));
    return { n, W: entries.map(node), slopes, isPositive: false };
  };
}

export function constantFile(W: readonly (readonly number[])[]): DualMetricFile {
  return { kind: "constant", n: W.length, W: W.flat() };
}

export const NO_RESIDUAL: ResidualFile = { terms: [] };

/**
 * The 3-state example (Manchester and Slotine, IEEE TAC 62(5), 2017; dynamics from memory) on [-half, half]^3 with W =
 * T^-1 Wz T^-T, T = [[1,0,0],[2 x1,1,0],[0,0,1]], Wz for the Riccati equation shifted by 0.5 (computed).
 */
export function threeState(half: number): { plant: Plant; metric: MetricField } {
  const range = [-half, half] as const;
  const plant = handPlant({
    states: { x1: range, x2: range, x3: range },
    inputs: { u: [-1, 1] },
    f: ["-x1 + x3", "x1^2 - x2 - 2*x1*x3 + x3", "-x2"],
    B: [["0"], ["0"], ["1"]],
    G: [["1"], ["0"], ["0"]],
  });
  const [a, b, c, d, e, f] = [1.307801, 0.183259, -0.249085, 0.723295, 0.080072, 0.658313];
  // s = -2 x1 = -2 half z0; all states share the half-range, so scaled and plain W differ by a factor only
  const s = `(${-2 * half}*z0)`;
  const w01 = `(${s}*${a} + ${b})`;
  const w11 = `(${s}^2*${a} + 2*${s}*${b} + ${d})`;
  const w12 = `(${s}*(${c}) + ${e})`;
  return {
    plant,
    metric: formulaMetric([
      [`${a}`, w01, `${c}`],
      [w01, w11, w12],
      [`${c}`, w12, `${f}`],
    ]),
  };
}

/** The same metric in float64 at scaled states. */
export function threeStateW(half: number, z0: number): number[][] {
  const s = -2 * half * z0;
  const [a, b, c, d, e, f] = [1.307801, 0.183259, -0.249085, 0.723295, 0.080072, 0.658313];
  const w01 = s * a + b;
  const w11 = s * s * a + 2 * s * b + d;
  const w12 = s * c + e;
  return [
    [a, w01, c],
    [w01, w11, w12],
    [c, w12, f],
  ];
}
