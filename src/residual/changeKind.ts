/**
 * What a leftover that grew is made of: the window means of one channel over runs are regressed (least squares with a
 * small ridge: Hoerl and Kennard, Technometrics 12(1), 1970) on functions of the states, and on the inputs with their
 * products with the states; each is scored on runs that it was not fitted on. What neither predicts is a larger leftover.
 */
import { Matrix, solve } from "ml-matrix";
import type { Run } from "../logs/recording.js";
import type { ControlAffineModel } from "../model/controlAffine.js";
import type { Scaling } from "../plant/scaling.js";
import { forEachWindow, leftoverSums } from "./leftover.js";

/** missingRate: a function of the states. inputGain: follows an input. largerLeftover: neither predicts it. */
export type ChangeKind = "missingRate" | "inputGain" | "largerLeftover";

export interface ChangeReading {
  readonly kind: ChangeKind;
  /** Input that it follows most, by index; null unless an input gain. */
  readonly input: number | null;
  /** Shares of the variance on runs left out, at most 1; negative: worse than the mean. */
  readonly explainedByStates: number;
  readonly explainedByInputs: number;
}

interface Row {
  readonly run: number;
  readonly target: number;
  readonly states: readonly number[];
  readonly inputs: readonly number[];
}

const ENOUGH = 0.3;
const RIDGE = 1e-6;
const FOLDS = 5;

export function changeKind(
  model: ControlAffineModel,
  scaling: Scaling,
  runs: readonly Run[],
  window: number,
  channel: number,
): ChangeReading {
  const rows = windowRows(model, scaling, runs, window, channel);
  const explainedByStates = explained(rows, ({ states }) => polynomial(states));
  const byInput = Array.from({ length: model.m }, (_, j) =>
    explained(rows, ({ states, inputs }) => [1, ...[1, ...states].map((z) => z * inputs[j]!)]),
  );
  const explainedByInputs = Math.max(...byInput, Number.NEGATIVE_INFINITY);
  const kind =
    explainedByInputs >= ENOUGH && explainedByInputs > explainedByStates
      ? "inputGain"
      : explainedByStates >= ENOUGH
        ? "missingRate"
        : "largerLeftover";
  const input = kind === "inputGain" ? byInput.indexOf(explainedByInputs) : null;
  return { kind, input, explainedByStates, explainedByInputs };
}

/** Every quarter of a window one row: overlapping windows repeat each other. */
function windowRows(
  model: ControlAffineModel,
  scaling: Scaling,
  runs: readonly Run[],
  window: number,
  channel: number,
): Row[] {
  const { n, m, p, active } = model;
  return runs.flatMap((run, index) =>
    leftoverSums(model, scaling, run).flatMap(({ time, channels }, part) => {
      const { states, inputs } = run.pieces[part]!;
      const rows: Row[] = [];
      let next = Number.NEGATIVE_INFINITY;
      forEachWindow(time, channels, p, window, (mean, start, end) => {
        if (time[start]! < next) return;
        next = time[start]! + window / 4;
        const middle = (start + end) >> 1;
        const meanInput = (j: number): number => {
          let sum = 0;
          for (let k = start; k < end; k++)
            sum += (inputs[k * m + j]! - scaling.inputCenter[j]!) / scaling.inputHalf[j]!;
          return sum / (end - start);
        };
        rows.push({
          run: index,
          target: mean[channel]!,
          states: active.map((i) => (states[middle * n + i]! - scaling.stateCenter[i]!) / scaling.stateHalf[i]!),
          inputs: Array.from({ length: m }, (_, j) => meanInput(j)),
        });
      });
      return rows;
    }),
  );
}

/** 1, the states and their products of two. */
function polynomial(states: readonly number[]): number[] {
  const products = states.flatMap((a, i) => states.slice(i).map((b) => a * b));
  return [1, ...states, ...products];
}

/** 1 - squared error over variance, each run predicted from the others. */
function explained(rows: readonly Row[], features: (row: Row) => readonly number[]): number {
  const folds = Math.min(FOLDS, new Set(rows.map(({ run }) => run)).size);
  if (folds < 2) return Number.NEGATIVE_INFINITY;
  let error = 0;
  for (let fold = 0; fold < folds; fold++) {
    const held = rows.filter(({ run }) => run % folds === fold);
    const weights = ridge(
      rows.filter(({ run }) => run % folds !== fold),
      features,
    );
    for (const row of held) error += (row.target - dot(features(row), weights)) ** 2;
  }
  const mean = rows.reduce((sum, { target }) => sum + target, 0) / rows.length;
  const variance = rows.reduce((sum, { target }) => sum + (target - mean) ** 2, 0);
  return variance > 0 ? 1 - error / variance : Number.NEGATIVE_INFINITY;
}

function ridge(rows: readonly Row[], features: (row: Row) => readonly number[]): number[] {
  const X = new Matrix(rows.map((row) => [...features(row)]));
  const gram = X.transpose()
    .mmul(X)
    .add(Matrix.eye(X.columns).mul(RIDGE * rows.length));
  const right = X.transpose().mmul(Matrix.columnVector(rows.map(({ target }) => target)));
  return solve(gram, right).to1DArray();
}

function dot(a: readonly number[], b: readonly number[]): number {
  return a.reduce((sum, value, i) => sum + value * b[i]!, 0);
}
