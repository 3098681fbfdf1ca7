/**
 * Pictures of the fitted terms: each along one of the states that it depends on, the others at the middle of the
 * envelope, beside what the logs say there. A logged value is the mean over a window of what the model without this term
 * leaves of the rate (leftover.ts),
 *   y = (1/T) [x_i(t+T) - x_i(t) - integral (f + B u without the term) dt],   for a gain divided by the mean held input,
 * put at the window's mean state. It owes nothing to the network of its own term. A term of several states scatters
 * around its line, for the others lie up to a quarter of their range beside it: that is no misfit (windowedError.ts is).
 */
import type { Run } from "../logs/recording.js";
import type { ResidualFile, ResidualTerm } from "../model/controlAffine.js";
import { fittedModel } from "../model/fittedModel.js";
import { featureValue } from "../nets/features.js";
import { mlpEvaluator } from "../nets/mlp.js";
import { perSecond } from "../plant/perSecond.js";
import type { Plant, StateSpec, UnknownTerm } from "../plant/plant.js";
import { plantScaling } from "../plant/scaling.js";
import { unitNamed } from "../plant/units.js";
import { forEachWindow, leftoverSums } from "./leftover.js";

/** One unknown term along one state, in the plant file's units. */
export interface ResidualCurve {
  /** Such as "added to the rate of speed" or "gain of turn in heading". */
  readonly title: string;
  readonly unit: string;
  readonly x: { readonly name: string; readonly unit: string; readonly values: readonly number[] };
  /** Fitted term on x.values; the prior's is zero by definition. */
  readonly fitted: readonly number[];
  /** Means of the logged windows near that line, where there are any; x ascending. */
  readonly logged: readonly { readonly x: number; readonly y: number }[];
}

const POINTS = 41;
const BINS = 25;
/** s; as in the fit: long enough to average the sensor noise of its two ends. */
const WINDOW = 0.5;
/** A window is near the line when each other state is within this part of its half-range from the middle. */
const NEAR = 0.5;
/** Share of an input's half-range below which a window's mean input says too little about its gain. */
const LEAST_INPUT = 0.3;

/** What one window says of a term: its mean state (n, SI) and the term's value there (SI). */
interface WindowValue {
  readonly state: Float64Array;
  readonly value: number;
}

/** One curve for each unknown term and each state that it depends on, in the order of the plant file. */
export function residualCurves(plant: Plant, residual: ResidualFile, runs: readonly Run[]): ResidualCurve[] {
  return plant.unknowns.flatMap((unknown, j) => {
    const term = residual.terms[j]!;
    const others = { terms: residual.terms.filter((other) => other !== term) };
    const windows = windowValues(plant, unknown, others, runs);
    const { unit, factor } = unitOf(plant, unknown);
    const title =
      unknown.input === null
        ? `added to the rate of ${plant.states[unknown.state]!.name}`
        : `gain of ${plant.inputs[unknown.input]!.name} in ${plant.states[unknown.state]!.name}`;
    return unknown.dependsOn.map((along): ResidualCurve => {
      const state = plant.states[along]!;
      const x = Array.from({ length: POINTS }, (_, i) => state.min + ((state.max - state.min) * i) / (POINTS - 1));
      return {
        title,
        unit,
        x: { name: state.name, unit: state.unit.name, values: x.map((value) => value / state.unit.factor) },
        fitted: valuesAlong(plant, term, along, x).map((value) => value / factor),
        logged: binned(plant, unknown, along, windows).map(({ x, y }) => ({ x: x / state.unit.factor, y: y / factor })),
      };
    });
  });
}

/** A gain between quantities of one kind, such as a turn rate in a heading, is a plain number. */
function unitOf(plant: Plant, { state, input }: UnknownTerm): { unit: string; factor: number } {
  const rate = { unit: perSecond(plant.states[state]!.unit.name), factor: plant.states[state]!.unit.factor };
  if (input === null) return rate;
  const given = plant.inputs[input]!.unit;
  const kind = unitNamed(rate.unit)?.si;
  if (kind !== undefined && kind === unitNamed(given.name)?.si) return { unit: "1", factor: 1 };
  return { unit: `${rate.unit} per ${given.name}`, factor: rate.factor / given.factor };
}

/** The term (SI) at values of one state (SI), the others at the middle. */
function valuesAlong(plant: Plant, term: ResidualTerm, along: number, x: readonly number[]): number[] {
  const { stateCenter, stateHalf } = plantScaling(plant);
  const net = mlpEvaluator(term.mlp);
  const out = new Float64Array(1);
  return x.map((value) => {
    const z = (value - stateCenter[along]!) / stateHalf[along]!;
    net.value(
      Float64Array.from(term.features, (feature) => featureValue(feature, feature.state === along ? z : 0)),
      out,
    );
    return term.outputScale * out[0]!;
  });
}

/** Every window of the runs; for a gain those with enough of the input. */
function windowValues(plant: Plant, unknown: UnknownTerm, others: ResidualFile, runs: readonly Run[]): WindowValue[] {
  const scaling = plantScaling(plant);
  const model = fittedModel(plant, others);
  const { n, m } = model;
  const { state: row, input } = unknown;
  const least = input === null ? 0 : LEAST_INPUT * scaling.inputHalf[input]!;
  // running sums of: the rate left over, the input, each state (trapezoid)
  const columns = 2 + n;
  const values: WindowValue[] = [];
  for (const run of runs) {
    for (const [index, { time, rates }] of leftoverSums(model, scaling, run).entries()) {
      const { states, inputs } = run.pieces[index]!;
      const sums = new Float64Array(time.length * columns);
      for (let k = 0; k < time.length; k++) sums[k * columns] = rates[k * n + row]! * scaling.stateHalf[row]!;
      for (let k = 0; k + 1 < time.length; k++) {
        const h = time[k + 1]! - time[k]!;
        const [from, to] = [k * columns, (k + 1) * columns];
        sums[to + 1] = sums[from + 1]! + h * (input === null ? 1 : inputs[k * m + input]!);
        for (let i = 0; i < n; i++) {
          sums[to + 2 + i] = sums[from + 2 + i]! + (h / 2) * (states[k * n + i]! + states[(k + 1) * n + i]!);
        }
      }
      forEachWindow(time, sums, columns, WINDOW, (mean) => {
        if (Math.abs(mean[1]!) >= least) values.push({ state: mean.slice(2), value: mean[0]! / mean[1]! });
      });
    }
  }
  return values;
}

/** Means over bins of one state of the windows near the line, SI; empty bins are left out. */
function binned(plant: Plant, { dependsOn }: UnknownTerm, along: number, windows: readonly WindowValue[]) {
  const scaled = ({ state }: WindowValue, i: number): number => {
    const spec = plant.states[i]!;
    return fromMiddle(spec, state[i]!) / ((spec.max - spec.min) / 2);
  };
  const bins = Array.from({ length: BINS }, () => ({ count: 0, z: 0, y: 0 }));
  for (const window of windows) {
    if (dependsOn.some((i) => i !== along && Math.abs(scaled(window, i)) > NEAR)) continue;
    const z = scaled(window, along);
    if (Math.abs(z) > 1) continue;
    const bin = bins[Math.min(BINS - 1, Math.floor(((z + 1) / 2) * BINS))]!;
    bin.count++;
    bin.z += z;
    bin.y += window.value;
  }
  const { min, max } = plant.states[along]!;
  return bins
    .filter(({ count }) => count > 0)
    .map(({ count, z, y }) => ({ x: (min + max) / 2 + ((max - min) / 2) * (z / count), y: y / count }));
}

/** Distance of a state from the middle of its envelope, SI; an angle (unwrapped in the logs) by the shorter way round. */
function fromMiddle({ min, max, isAngle }: StateSpec, value: number): number {
  const distance = value - (min + max) / 2;
  return isAngle ? distance - 2 * Math.PI * Math.round(distance / (2 * Math.PI)) : distance;
}
