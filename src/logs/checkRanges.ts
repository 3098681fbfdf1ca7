/**
 * Values against the envelope: how much lies outside, inputs beyond their range or that never move, and a scale that
 * looks like another unit. Cyclic states and a declared heading have no bounds to be outside of.
 */
import type { Plant } from "../plant/plant.js";
import { activeStates } from "../plant/scaling.js";
import type { Finding } from "./cutRuns.js";
import type { Run } from "./recording.js";

/** A median size this many times the envelope's largest value cannot be the declared unit. */
const SCALE_SUSPECT = 10;

export function checkRanges(plant: Plant, file: string, runs: readonly Run[]): Finding[] {
  const findings: Finding[] = [];
  const active = activeStates(plant);
  const report = (kind: Finding["kind"], count: number, text: string): void => {
    findings.push({ kind, file, run: null, count, row: null, text });
  };
  plant.states.forEach((state, i) => {
    const values = series(runs, "states", plant.states.length, i);
    const bounded = active.includes(i);
    if (bounded || !state.isAngle) {
      const limit = Math.max(Math.abs(state.min), Math.abs(state.max));
      const size = typicalSize(values);
      if (bounded && size > SCALE_SUSPECT * limit) {
        report(
          "scale",
          values.length,
          `'${state.name}' is typically ${(size / limit).toPrecision(2)} times its envelope's largest value: its unit in logs.columns looks wrong${state.isAngle && size / limit > 30 ? " (degrees read as radians?)" : ""}`,
        );
      }
    }
    if (!bounded) return;
    const outside = values.filter((value) => value < state.min || value > state.max);
    if (outside.length === 0) return;
    const worst = outside.reduce((most, value) => Math.max(most, state.min - value, value - state.max), 0);
    const share = (100 * outside.length) / values.length;
    report(
      "outsideEnvelope",
      outside.length,
      `'${state.name}' is outside its envelope in ${share.toPrecision(2)} % of the samples, by at most ${(worst / state.unit.factor).toPrecision(3)} ${state.unit.name}; they are kept for the fit and are no evidence for the envelope`,
    );
  });
  plant.inputs.forEach((input, j) => {
    const values = series(runs, "inputs", plant.inputs.length, j);
    const slack = 1e-6 * (input.max - input.min);
    const outside = values.filter((value) => value < input.min - slack || value > input.max + slack);
    if (outside.length > 0) {
      report(
        "inputOutsideRange",
        outside.length,
        `'${input.name}' is outside its range in ${((100 * outside.length) / values.length).toPrecision(2)} % of the samples`,
      );
    }
    const isConstant = values.length > 0 && values.every((value) => value === values[0]);
    if (isConstant)
      report("constantInput", values.length, `'${input.name}' never moves: nothing about its gain can be learned`);
  });
  return findings;
}

function series(runs: readonly Run[], kind: "states" | "inputs", width: number, column: number): number[] {
  const out: number[] = [];
  for (const run of runs) {
    for (const piece of run.pieces)
      for (let at = column; at < piece[kind].length; at += width) out.push(piece[kind][at]!);
  }
  return out;
}

/** Median of the absolute values. */
function typicalSize(values: readonly number[]): number {
  const sorted = values.map(Math.abs).sort((a, b) => a - b);
  return sorted[sorted.length >> 1] ?? 0;
}
