/**
 * Fits the unknown terms: one small tanh network each, trained together over windows of the fit runs (trainingWindows),
 * Huber loss (Huber, Ann. Math. Stat. 35(1), 1964) on errors in units of the prior's own, Adam (Kingma and Ba, ICLR 2015)
 * with a cosine-decaying rate, the best weights on the validation runs kept. The networks start as zero, so that the
 * first candidate is the prior itself. From an earlier residual of the same plant only the last layers are fitted: the
 * first ones hold what curves such terms have, and a few runs are enough for the rest (test/bench/refit.json).
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
  nodeWeights,
  preparePieces,
  type Window,
  type WindowShape,
  windowShape,
  windowTarget,
} from "./trainingWindows.js";

export interface FitStep {
  readonly step: number;
  /** Mean Huber loss of a batch and of the validation windows, in units of the prior's error squared. */
  readonly train: number;
  readonly validation: number;
}

export interface FittedResidual {
  /**
   * improved: better on the validation runs than where it started, the prior or an earlier residual. noBetterThanPrior: no
   * step was, and the terms are as they started; look at the unknown terms and their states in the plant file, or at the
   * logs. nothingUnknown: the plant declares no term.
   */
  readonly status: "improved" | "noBetterThanPrior" | "nothingUnknown";
  readonly residual: ResidualFile;
  /** Step 0 is the prior, or the earlier residual. */
  readonly history: readonly FitStep[];
  /** Step whose weights are kept. */
  readonly bestStep: number;
  /** Runs that the weights were trained on, and runs that chose among them. */
  readonly trainingRuns: number;
  readonly validationRuns: number;
}

export interface FitServices {
  readonly engine: Engine;
  readonly random: Random;
  readonly progress: (done: number, total: number, note: string) => void;
  readonly signal?: AbortSignal | undefined;
}

/** s. Long enough to average the sensor noise of its two ends, short enough that a window stays near one state. */
const WINDOW = 0.5;
/** s between the nodes at which a network is read. */
const NODE_SPACING = 0.1;
const BATCH = 64;
const VALIDATION_SHARE = 0.2;
const VALIDATION_WINDOWS = 512;
const CHECK_EVERY = 50;
const LEARNING_RATE = 1e-2;
/** From an earlier residual: share of the steps, and the last layers that are fitted, with few runs and with more. */
const WARM = [
  { runs: 0, steps: 0.3, layers: 1 },
  { runs: 20, steps: 0.5, layers: 2 },
] as const;
/** Where the loss turns from square to linear, in units of the prior's error. */
const HUBER = 0.5;

/** start: an earlier residual of the same unknown terms, or null. Throws when the fit runs hold no window, and when `signal` aborts. */
export async function fitResidual(
  plant: Plant,
  runs: readonly Run[],
  services: FitServices,
  start: ResidualFile | null = null,
): Promise<FittedResidual> {
  const { random, signal, progress } = services;
  const { tf } = services.engine;
  if (plant.unknowns.length === 0) {
    const none = { residual: { terms: [] }, history: [], bestStep: 0, trainingRuns: 0, validationRuns: 0 };
    return { status: "nothingUnknown", ...none };
  }
  const windows = fitWindows(plant, runs, random);
  const warm = start === null ? null : WARM.findLast(({ runs: least }) => windows.trainingRuns >= least)!;
  const networks = termNetworks(tf, plant, windows, random, start, warm?.layers ?? null);
  const optimizer = tf.train.adam(LEARNING_RATE);
  const draw = random.stream("windows");
  const heldOut = Array.from({ length: VALIDATION_WINDOWS }, () => windows.validation(draw));
  const lossOf = (batch: readonly Window[]): number => tf.tidy(() => networks.loss(batch).dataSync()[0]!);
  const steps = Math.ceil((warm?.steps ?? 1) * plant.settings.residualNet.steps);
  const history: FitStep[] = [];
  let best = { validation: Number.POSITIVE_INFINITY, step: 0, residual: networks.toFile() };
  try {
    for (let step = 0; step <= steps; step++) {
      signal?.throwIfAborted();
      const batch = Array.from({ length: BATCH }, () => windows.train(draw));
      if (step % CHECK_EVERY === 0 || step === steps) {
        const validation = lossOf(heldOut);
        history.push({ step, train: lossOf(batch), validation });
        if (validation < best.validation) best = { validation, step, residual: networks.toFile() };
        progress(step, steps, `validation ${validation.toPrecision(3)}`);
        await new Promise((resolve) => setImmediate(resolve));
      }
      tf.tidy(() => {
        const { grads } = tf.variableGrads(() => networks.loss(batch), networks.variables);
        const decay = 0.01 + 0.495 * (1 + Math.cos((Math.PI * step) / steps));
        // tfjs keeps Adam's rate in a protected field; a decaying rate is the usual reason to set it
        (optimizer as object as { learningRate: number }).learningRate = LEARNING_RATE * decay;
        optimizer.applyGradients(grads as Parameters<typeof optimizer.applyGradients>[0]);
      });
    }
  } finally {
    optimizer.dispose();
    networks.dispose();
  }
  return {
    status: best.step > 0 ? "improved" : "noBetterThanPrior",
    residual: best.residual,
    history,
    bestStep: best.step,
    trainingRuns: windows.trainingRuns,
    validationRuns: windows.validationRuns,
  };
}

interface FitWindows {
  readonly shape: WindowShape;
  /** States with an unknown term; scales: the size of the prior's error there, SI per second. */
  readonly rates: readonly number[];
  readonly scales: readonly number[];
  readonly train: (random: Random) => Window;
  readonly validation: (random: Random) => Window;
  readonly trainingRuns: number;
  readonly validationRuns: number;
}

function fitWindows(plant: Plant, runs: readonly Run[], random: Random): FitWindows {
  const scaling = plantScaling(plant);
  const features = plant.unknowns.map((term) => featuresOf(plant, term.dependsOn));
  const rates = [...new Set(plant.unknowns.map((term) => term.state))];
  const order = random.stream("validation").permutation(runs.length);
  const validationRuns = Math.max(1, Math.round(VALIDATION_SHARE * runs.length));
  const [held, trained] = [order.slice(0, validationRuns), order.slice(validationRuns)].map((indices) =>
    preparePieces(
      plant,
      scaling,
      indices.map((i) => runs[i]!),
      rates,
      features,
    ),
  ) as [ReturnType<typeof preparePieces>, ReturnType<typeof preparePieces>];
  const steps = trained.flatMap(({ time }) => Array.from(time.subarray(1), (t, k) => t - time[k]!));
  steps.sort((a, b) => a - b);
  const shape = windowShape(steps[steps.length >> 1] ?? WINDOW, WINDOW, NODE_SPACING);
  const train = balancedWindows(trained, shape);
  const validation = balancedWindows(held, shape);
  if (train === null || validation === null) {
    throw new Error(
      `${runs.length} fit runs hold no stretch of ${WINDOW} s without a gap in ` +
        `${train === null ? "the part to train on" : "the part to validate on"}; ` +
        "give at least two longer runs, or raise logs.maxGap if the gaps are harmless",
    );
  }
  const scales = rates.map((_, r) => {
    const errors = trained.flatMap((piece) => {
      const starts = Math.max(0, Math.floor((piece.time.length - 1) / shape.length));
      return Array.from({ length: starts }, (_, i) =>
        Math.abs(windowTarget({ piece, start: i * shape.length }, r, rates.length, shape)),
      );
    });
    return robustScale(errors);
  });
  return { shape, rates, scales, train, validation, trainingRuns: runs.length - validationRuns, validationRuns };
}

/** The 90 % quantile of the absolute errors: an outlier in the log does not move it, an error in one corner is seen. */
function robustScale(errors: number[]): number {
  errors.sort((a, b) => a - b);
  const scale = errors[Math.floor(0.9 * (errors.length - 1))]!;
  return scale > 0 ? scale : 1;
}

/** The networks of all terms as one: their loss over windows, their weights, their saved form. */
function termNetworks(
  tf: typeof Tf,
  plant: Plant,
  { shape, rates, scales }: FitWindows,
  random: Random,
  start: ResidualFile | null,
  fittedLayers: number | null,
) {
  const { unknowns } = plant;
  const { width } = plant.settings.residualNet;
  const { inputHalf } = plantScaling(plant);
  const nodes = shape.length / shape.stride + 1;
  const terms = unknowns.map((term, j) => {
    const features = featuresOf(plant, term.dependsOn);
    const from = start?.terms[j];
    if (from !== undefined) {
      const { outputScale } = from;
      return { features, rate: rates.indexOf(term.state), outputScale, net: trainableMlp(tf, from.mlp) };
    }
    return {
      features,
      rate: rates.indexOf(term.state),
      outputScale: scales[rates.indexOf(term.state)]! / (term.input === null ? 1 : inputHalf[term.input]!),
      net: trainableMlp(tf, initialMlp([features.length, width, width, 1], random.stream(`term ${j}`), 0)),
    };
  });
  /** Part of the mean rate of one term over each window: [windows, 1], SI per second. */
  const meanOf = (windows: readonly Window[], j: number): Tf.Tensor2D => {
    const { features, net, outputScale } = terms[j]!;
    const F = features.length;
    const x = new Float32Array(windows.length * nodes * F);
    const q = new Float32Array(windows.length * nodes);
    windows.forEach((window, i) => {
      const from = window.piece.terms[j]!.features;
      for (let c = 0; c < nodes; c++) {
        const k = window.start + c * shape.stride;
        for (let f = 0; f < F; f++) x[(i * nodes + c) * F + f] = from[k * F + f]!;
      }
      nodeWeights(window, j, shape, q, i * nodes);
    });
    const y = tf.reshape(net.value(tf.tensor2d(x, [windows.length * nodes, F])), [windows.length, nodes]);
    return tf.mul(tf.sum(tf.mul(y, tf.tensor2d(q, [windows.length, nodes])), 1, true), outputScale) as Tf.Tensor2D;
  };
  const loss = (windows: readonly Window[]): Tf.Scalar => {
    const errors = rates.map((_, r) => {
      const target = Float32Array.from(windows, (window) => windowTarget(window, r, rates.length, shape));
      const predicted = terms.flatMap(({ rate }, j) => (rate === r ? [meanOf(windows, j)] : []));
      const left = tf.sub(
        tf.tensor2d(target, [windows.length, 1]),
        predicted.reduce((a, b) => tf.add(a, b)),
      );
      return tf.mul(left, 1 / scales[r]!);
    });
    const size = tf.abs(tf.concat(errors, 1));
    const inner = tf.minimum(size, HUBER);
    const huber = tf.add(tf.mul(0.5, tf.square(inner)), tf.mul(HUBER, tf.sub(size, inner)));
    return tf.mul(tf.sum(huber), 1 / (windows.length * rates.length)) as Tf.Scalar;
  };
  return {
    loss,
    variables: terms.flatMap(({ net }) =>
      fittedLayers === null ? net.variables : net.variables.slice(-2 * fittedLayers),
    ),
    toFile: (): ResidualFile => ({
      terms: unknowns.map(({ state, input }, j) => {
        const { features, net, outputScale } = terms[j]!;
        return { state, input, features, mlp: net.toMlp(), outputScale };
      }),
    }),
    dispose: (): void => {
      for (const { net } of terms) net.dispose();
    },
  };
}
