/**
 * Learns the dual metric W(z) = w0 I + L(z) L(z)^T from a constant one, in rounds: train on a pool of states, let the
 * judge (the verifier) rate the result and name the worst states, add these to the pool, go on. The best round judged
 * is returned, the constant start included, so learning never ends worse than it began.
 *
 * Published method: counterexample-guided training of contraction metrics with a hinge on the violation; here the
 * network's value and one tangent per direction f, b_1 .. b_m suffice (stateTerms.ts), and the contraction rate is
 * trained with the weights unless it is given.
 */
import type { Engine } from "../engine/openEngine.js";
import { initialMlp, trainableMlp } from "../engine/trainableMlp.js";
import type { ControlAffineModel } from "../model/controlAffine.js";
import type { DualMetricFile } from "../nets/dualMetric.js";
import { type Feature, featureValue } from "../nets/features.js";
import { type Layer, type Mlp, mlpEvaluator } from "../nets/mlp.js";
import { cholesky, solveLower, symmetricEigen } from "../num/dense.js";
import type { Random } from "../num/random.js";
import type { BatchValue, ObjectiveSettings } from "./batchObjective.js";
import { metricTrainer } from "./metricTrainer.js";
import { leftProduct, packedSize, unpack } from "./packedFactor.js";
import { type TrainingState, trainingState } from "./trainingState.js";

export interface LearnSettings extends Omit<ObjectiveSettings, "referenceRate"> {
  readonly features: readonly Feature[];
  readonly width: number;
  /** Adam steps over all rounds together. */
  readonly steps: number;
  readonly rounds: number;
  /** A given contraction rate, 1/s; null: trained, starting from `initialRate`. */
  readonly rate: number | null;
  readonly initialRate: number;
  /** A metric to start from: an analytic one, or a network of an earlier run; then its features and sizes are kept. */
  readonly start: DualMetricFile;
}

/** The verifier's word on a metric: its asked margin (null when it gives none) and active states worth training on. */
export interface Judgement {
  readonly margin: number | null;
  readonly worstStates: readonly Float64Array[];
}

export interface LearnStep extends Omit<BatchValue, "objective" | "rateSlope"> {
  readonly round: number;
  readonly step: number;
  readonly rate: number;
}

export interface LearnedMetric {
  readonly metric: DualMetricFile;
  /** Rate that training ended at, 1/s. */
  readonly rate: number;
  readonly margin: number | null;
  readonly bestRound: number;
  /** Rounds trained, those asked for by the prover included. */
  readonly rounds: number;
  /** The prover closed its tube. */
  readonly isProved: boolean;
  readonly history: readonly LearnStep[];
}

export interface LearnServices {
  readonly engine: Engine;
  readonly random: Random;
  /** `rate` is the rate reached in training. */
  readonly judge: (metric: DualMetricFile, rate: number) => Judgement;
  /** Active states where a proof of the metric's tube stops; null when it closes. */
  readonly openStates: (metric: DualMetricFile) => Promise<readonly Float64Array[] | null>;
  readonly progress: (done: number, total: number, note: string) => void;
  readonly signal?: AbortSignal | undefined;
}

const POOL = 2048;
const BATCH = 96;
const HARD_IN_BATCH = 48;
const HARD_KEPT = 256;
const LAST_SCALE = 0.02;
/** The learning rate falls to this share of its first. */
const LAST_DECAY = 0.02;
/** Rounds that the prover may ask for. */
const PROVER_ROUNDS = 3;
const LEARNING_RATE = 1e-2;
const RATE_LEARNING_RATE = 1e-2;
/** From a network of an earlier run the steps are shorter, so as not to leave a place that is nearly right. */
const WARM_STEP = 0.3;

export async function learnMetric(
  model: ControlAffineModel,
  corners: readonly Float64Array[],
  settings: LearnSettings,
  services: LearnServices,
): Promise<LearnedMetric> {
  const { n } = model;
  const { engine, random, judge, openStates, progress } = services;
  const { w0, features, mix, initial } = startingPoint(settings, n, random);
  const net = trainableMlp(engine.tf, initial);
  const toFile = (): DualMetricFile => ({ kind: "network", n, w0, features, mlp: mixed(net.toMlp(), mix) });
  const draw = random.stream("states");
  const pool = Array.from({ length: POOL }, () =>
    trainingState(
      model,
      features,
      Float64Array.from(model.active, () => 2 * draw.uniform() - 1),
    ),
  );
  const hard: TrainingState[] = [];
  const addHard = (states: readonly Float64Array[]): void => {
    for (const active of states) hard.push(trainingState(model, features, active));
    hard.splice(0, Math.max(0, hard.length - HARD_KEPT));
  };
  const pick = random.stream("batches");
  const trainer = metricTrainer(engine, net, model, corners, w0, mix, BATCH, {
    ...settings,
    features,
    referenceRate: settings.rate ?? settings.initialRate,
  });
  const history: LearnStep[] = [];
  const perRound = Math.ceil(settings.steps / settings.rounds);
  const total = perRound * settings.rounds;
  const stepScale = settings.start.kind === "network" ? WARM_STEP : 1;
  let lambda = settings.rate ?? settings.initialRate;

  const trainRound = async (round: number): Promise<void> => {
    for (let step = 0; step < perRound; step++) {
      services.signal?.throwIfAborted();
      const done = (round - 1) * perRound + step;
      const hardCount = Math.min(hard.length, HARD_IN_BATCH);
      const batch = [
        ...Array.from({ length: BATCH - hardCount }, () => pool[pick.integer(POOL)]!),
        ...Array.from({ length: hardCount }, () => hard[pick.integer(hard.length)]!),
      ];
      const decay = stepScale * (0.5 * (1 + Math.cos(Math.PI * Math.min(1, done / total))) + LAST_DECAY);
      const value = trainer.step(batch, lambda, LEARNING_RATE * decay);
      if (done % 10 === 0) {
        history.push({ round, step: done, rate: lambda, margin: value.margin, shortfall: value.shortfall });
      }
      if (settings.rate === null) lambda = trainer.stepRate(lambda, value.rateSlope, RATE_LEARNING_RATE * decay);
      if (step % 25 === 0) {
        progress(Math.min(done, total), total, `round ${round} of ${settings.rounds}`);
        await new Promise((resolve) => setImmediate(resolve));
      }
    }
  };
  const judged = (round: number): JudgedRound => {
    const metric = toFile();
    const { margin, worstStates } = judge(metric, lambda);
    addHard(worstStates);
    return { metric, rate: lambda, margin, bestRound: round };
  };

  try {
    let best = judged(0);
    let round = 0;
    while (round < settings.rounds) {
      await trainRound(++round);
      const made = judged(round);
      if (isBetter(made.margin, best.margin)) best = made;
    }
    let candidate = best;
    let isProved = false;
    for (let extra = 0; candidate.margin !== null; extra++) {
      progress(total, total, "the prover's word");
      const open = await openStates(candidate.metric);
      isProved = open === null;
      if (open === null || extra === PROVER_ROUNDS) break;
      addHard(open);
      await trainRound(++round);
      candidate = judged(round);
    }
    return { ...(isProved ? candidate : best), rounds: round, isProved, history };
  } finally {
    trainer.dispose();
  }
}

type JudgedRound = Pick<LearnedMetric, "metric" | "rate" | "margin" | "bestRound">;

function isBetter(margin: number | null, than: number | null): boolean {
  return margin !== null && (than === null || margin < than);
}

interface StartingPoint {
  readonly w0: number;
  readonly features: readonly Feature[];
  /** The matrix of Y -> L0 Y on packed rows, and the network for Y. */
  readonly mix: readonly (readonly number[])[];
  readonly initial: Mlp;
}

function startingPoint({ start, features, width }: LearnSettings, n: number, random: Random): StartingPoint {
  if (start.kind === "constant") {
    const { w0, L } = constantFactor(Float64Array.from(start.W), n);
    const sizes = [features.length, width, width, packedSize(n)];
    const initial = withBias(initialMlp(sizes, random.stream("weights"), LAST_SCALE), packedIdentity(n));
    return { w0, features, mix: leftProduct(L, n), initial };
  }
  // the factor that the network has at the middle of the envelope; its output there becomes Y = I
  const middle = new Float64Array(packedSize(n));
  const z = new Float64Array(n);
  const values = Float64Array.from(start.features, (feature) => featureValue(feature, z[feature.state]!));
  mlpEvaluator(start.mlp).valueAndTangents(values, new Float64Array(0), 0, middle, new Float64Array(0));
  const L = new Float64Array(n * n);
  unpack(middle, 0, L, n);
  const { w0 } = start;
  return {
    w0,
    features: start.features,
    mix: leftProduct(L, n),
    initial: mixed(start.mlp, leftProduct(inverseFactor(L, n), n)),
  };
}

/** Of a lower-triangular matrix. */
function inverseFactor(L: Float64Array, n: number): Float64Array {
  const inverse = new Float64Array(n * n);
  for (let j = 0; j < n; j++) {
    const column = Float64Array.from({ length: n }, (_, i) => (i === j ? 1 : 0));
    solveLower(L, column, n);
    for (let i = 0; i < n; i++) inverse[i * n + j] = column[i]!;
  }
  return inverse;
}

/** W scaled to a unit mean diagonal, split as w0 I + L L^T with w0 a twentieth of its least eigenvalue. */
function constantFactor(start: Float64Array, n: number): { w0: number; L: Float64Array } {
  let trace = 0;
  for (let i = 0; i < n; i++) trace += start[i * n + i]!;
  const W = start.map((value) => (value * n) / trace);
  const values = new Float64Array(n);
  symmetricEigen(W.slice(), n, values, null);
  const w0 = values.reduce((a, b) => Math.min(a, b)) / 20;
  for (let i = 0; i < n; i++) W[i * n + i]! -= w0;
  const L = new Float64Array(n * n);
  if (!cholesky(W, L, n)) throw new Error("the metric to start from is not positive definite; start from one that is");
  return { w0, L };
}

function packedIdentity(n: number): number[] {
  return Array.from({ length: n }, (_, i) => Array.from({ length: i + 1 }, (_, j) => (i === j ? 1 : 0))).flat();
}

function withLast(mlp: Mlp, change: (last: Layer) => Layer): Mlp {
  return { layers: [...mlp.layers.slice(0, -1), change(mlp.layers.at(-1)!)] };
}

function withBias(mlp: Mlp, bias: readonly number[]): Mlp {
  return withLast(mlp, (last) => ({ ...last, bias }));
}

/** The network followed by y -> y T, as one network. */
function mixed(mlp: Mlp, T: readonly (readonly number[])[]): Mlp {
  const size = T.length;
  return withLast(mlp, ({ weights, bias }) => {
    const combine = (values: (k: number) => number, to: number): number => {
      let sum = 0;
      for (let k = 0; k < size; k++) sum += T[k]![to]! * values(k);
      return sum;
    };
    const rows = Array.from({ length: size }, (_, to) => to);
    return {
      weights: rows.map((to) => weights[0]!.map((_, c) => combine((k) => weights[k]![c]!, to))),
      bias: rows.map((to) => combine((k) => bias[k]!, to)),
    };
  });
}
