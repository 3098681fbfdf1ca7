/**
 * Fits the unknown terms: one small tanh network each, trained together over windows of the fit runs (trainingWindows),
 * Huber loss (Huber, Ann. Math. Stat. 35(1), 1964) on errors in units of the prior's own windowed error, Adam with a
 * cosine-decaying rate, the best weights on the validation runs kept.
 */
import type * as Tf from "@tensorflow/tfjs-core";
import type { Engine } from "../engine/openEngine.js";
import { initialMlp, trainableMlp } from "../engine/trainableMlp.js";
import type { Run } from "../logs/recording.js";
import type { ResidualFile } from "../model/controlAffine.js";
import { featuresOf } from "../nets/features.js";
import type { Random } from "../num/random.js";
import type { Plant } from "../plant/plant.js";
import { plantScaling } from "../plant/scaling.js";
import {
  balancedWindows,
  durationOf,
  type PreparedPiece,
  preparePieces,
  type Window,
  windowWeights,
} from "./trainingWindows.js";

export interface FitStep {
  readonly step: number;
  /** Mean Huber loss, in units of the prior's error squared. */
  readonly train: number;
  readonly validation: number;
}

export interface FittedResidual {
  readonly residual: ResidualFile;
  readonly history: readonly FitStep[];
  /** Step whose weights are kept. */
  readonly bestStep: number;
  readonly fitRuns: number;
  readonly validationRuns: number;
}

export interface FitServices {
  readonly engine: Engine;
  readonly random: Random;
  readonly progress: (done: number, total: number, note: string) => void;
  readonly signal?: AbortSignal | undefined;
}

/** Windows of the fit, in samples' steps: half a second at 50 Hz. Short ones are noisier, not biased. */
const WINDOW_SECONDS = 0.5;
const BATCH = 64;
const VALIDATION_SHARE = 0.2;
const VALIDATION_WINDOWS = 512;
const CHECK_EVERY = 50;
const LEARNING_RATE = 1e-2;
const HUBER = 0.5;

export async function fitResidual(plant: Plant, runs: readonly Run[], services: FitServices): Promise<FittedResidual> {
  const { engine, random, progress, signal } = services;
  const { tf } = engine;
  const { unknowns } = plant;
  if (unknowns.length === 0)
    return { residual: { terms: [] }, history: [], bestStep: 0, fitRuns: runs.length, validationRuns: 0 };
  const scaling = plantScaling(plant);
  const features = unknowns.map((term) => featuresOf(plant, term.dependsOn));
  const rates = [...new Set(unknowns.map((term) => term.state))];
  const order = random.stream("validation").permutation(runs.length);
  const validationRuns = Math.max(1, Math.round(VALIDATION_SHARE * runs.length));
  const pick = (indices: readonly number[]): PreparedPiece[] =>
    preparePieces(
      plant,
      scaling,
      indices.map((i) => runs[i]!),
      rates,
      features,
    );
  const trainPieces = pick(order.slice(validationRuns));
  const length = stepsPerWindow(trainPieces, WINDOW_SECONDS);
  const usable = (pieces: readonly PreparedPiece[]): PreparedPiece[] => pieces.filter((piece) => piece.count > length);
  const train = usable(trainPieces);
  const validation = usable(pick(order.slice(0, validationRuns)));
  const draw = random.stream("windows");
  const scales = priorScales(train, rates.length, length);
  const inputScale = unknowns.map(({ input }) => (input === null ? 1 : scaling.inputHalf[input]!));
  const outputScales = unknowns.map(({ state }, j) => scales[rates.indexOf(state)]! / inputScale[j]!);

  const width = plant.settings.residualNet.width;
  const nets = unknowns.map((_, j) =>
    trainableMlp(tf, initialMlp([features[j]!.length, width, width, 1], random.stream(`term ${j}`), 0.1)),
  );
  const optimizer = tf.train.adam(LEARNING_RATE);
  const loss = (windows: readonly Window[]): Tf.Scalar => {
    const predicted: Tf.Tensor2D[][] = rates.map(() => []);
    unknowns.forEach(({ state }, j) => {
      const { x, q } = termBatch(windows, j, features[j]!.length, length);
      const y = tf.reshape(nets[j]!.value(tf.tensor2d(x, [windows.length * (length + 1), features[j]!.length])), [
        windows.length,
        length + 1,
      ]);
      const weighted = tf.mul(y, tf.tensor2d(q, [windows.length, length + 1]));
      const mean = tf.sum(tf.mul(weighted, outputScales[j]!), 1, true) as Tf.Tensor2D;
      predicted[rates.indexOf(state)]!.push(mean);
    });
    const errors = predicted.map((parts, r) => {
      const target = targets(windows, r, rates.length, length);
      const total = parts.reduce((a, b) => tf.add(a, b));
      return tf.div(tf.sub(total, tf.tensor2d(target, [windows.length, 1])), scales[r]!);
    });
    const size = tf.abs(tf.concat(errors, 1));
    const inner = tf.minimum(size, HUBER);
    return tf.mean(tf.add(tf.mul(0.5, tf.square(inner)), tf.mul(HUBER, tf.sub(size, inner)))) as Tf.Scalar;
  };
  const variables = nets.flatMap((net) => net.variables);
  const toFile = (): ResidualFile => ({
    terms: unknowns.map(({ state, input }, j) => ({
      state,
      input,
      features: features[j]!,
      mlp: nets[j]!.toMlp(),
      outputScale: outputScales[j]!,
    })),
  });
  const heldOutWindow = balancedWindows(validation, length);
  const heldOut = Array.from({ length: VALIDATION_WINDOWS }, () => heldOutWindow(draw));
  const trainWindow = balancedWindows(train, length);
  const lossOf = (windows: readonly Window[]): number => tf.tidy(() => loss(windows).dataSync()[0]!);

  const { steps } = plant.settings.residualNet;
  const history: FitStep[] = [];
  let best = { validation: Number.POSITIVE_INFINITY, step: 0, residual: toFile() };
  for (let step = 0; step <= steps; step++) {
    signal?.throwIfAborted();
    const batch = Array.from({ length: BATCH }, () => trainWindow(draw));
    if (step % CHECK_EVERY === 0) {
      const checked = { step, train: lossOf(batch), validation: lossOf(heldOut) };
      history.push(checked);
      if (checked.validation < best.validation) best = { validation: checked.validation, step, residual: toFile() };
      progress(step, steps, `validation ${checked.validation.toPrecision(3)}`);
      await new Promise((resolve) => setImmediate(resolve));
    }
    const decay = 0.5 * (1 + Math.cos((Math.PI * step) / steps)) + 0.01;
    tf.tidy(() => {
      const { grads } = tf.variableGrads(() => loss(batch), variables);
      (optimizer as object as { learningRate: number }).learningRate = LEARNING_RATE * decay;
      optimizer.applyGradients(grads as Parameters<typeof optimizer.applyGradients>[0]);
    });
  }
  optimizer.dispose();
  for (const net of nets) net.dispose();
  return {
    residual: best.residual,
    history,
    bestStep: best.step,
    fitRuns: runs.length - validationRuns,
    validationRuns,
  };
}

/** Steps of a window of about `seconds`, from the median step of the pieces. */
function stepsPerWindow(pieces: readonly PreparedPiece[], seconds: number): number {
  const steps = pieces.flatMap((piece) => Array.from(piece.steps.subarray(0, 100))).sort((a, b) => a - b);
  return Math.max(2, Math.round(seconds / steps[steps.length >> 1]!));
}

/** Root mean square of the prior's windowed error per unknown rate, SI per second. */
function priorScales(pieces: readonly PreparedPiece[], rates: number, length: number): number[] {
  return Array.from({ length: rates }, (_, r) => {
    let sum = 0;
    let count = 0;
    for (const piece of pieces) {
      for (let start = 0; start + length < piece.count; start += length) {
        const moved = piece.unexplained[(start + length) * rates + r]! - piece.unexplained[start * rates + r]!;
        sum += (moved / durationOf(piece, start, length)) ** 2;
        count++;
      }
    }
    return Math.sqrt(sum / count);
  });
}

function targets(windows: readonly Window[], r: number, rates: number, length: number): Float32Array {
  return Float32Array.from(windows, ({ piece, start }) => {
    const moved = piece.unexplained[(start + length) * rates + r]! - piece.unexplained[start * rates + r]!;
    return moved / durationOf(piece, start, length);
  });
}

/** Features (windows * (length + 1)) x F and trapezoid weights windows x (length + 1) of one term. */
function termBatch(windows: readonly Window[], term: number, features: number, length: number) {
  const x = new Float32Array(windows.length * (length + 1) * features);
  const q = new Float32Array(windows.length * (length + 1));
  windows.forEach(({ piece, start }, i) => {
    const from = piece.terms[term]!.features;
    x.set(from.subarray(start * features, (start + length + 1) * features), i * (length + 1) * features);
    windowWeights(piece, term, start, length, durationOf(piece, start, length), q, i * (length + 1));
  });
  return { x, q };
}
