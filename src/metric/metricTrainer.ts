/**
 * One step at a time on the weights of the metric network and on log lambda, both by Adam (Kingma and Ba, ICLR 2015,
 * algorithm 1). The engine evaluates the network and its tangents and differentiates them; the objective's gradient in
 * W enters as fixed adjoints, computed in float64. The network is trained for the factor relative to the start's, L = L0 Y
 * (`mix` is the matrix of Y -> L0 Y on packed rows), so that every entry of Y is of the order of one.
 */
import type { Scalar, Tensor2D } from "@tensorflow/tfjs-core";
import type { Engine } from "../engine/openEngine.js";
import type { trainableMlp } from "../engine/trainableMlp.js";
import type { ControlAffineModel } from "../model/controlAffine.js";
import type { Feature } from "../nets/features.js";
import { type BatchMember, type BatchValue, batchObjective, type ObjectiveSettings } from "./batchObjective.js";
import { addFactorAdjoint, factorTangent, fromFactor, packedSize, unpack } from "./packedFactor.js";
import { stateTerms } from "./stateTerms.js";
import type { TrainingState } from "./trainingState.js";

export function metricTrainer(
  engine: Engine,
  net: ReturnType<typeof trainableMlp>,
  model: ControlAffineModel,
  corners: readonly Float64Array[],
  w0: number,
  mix: readonly (readonly number[])[],
  batchSize: number,
  settings: ObjectiveSettings & { readonly features: readonly Feature[] },
) {
  const { tf } = engine;
  const { n, m } = model;
  const packed = packedSize(n);
  const inputs = settings.features.length;
  const terms = stateTerms(n, m, model.rotation, corners);
  const optimizer = tf.train.adam(1e-3);
  const toFactor = tf.tensor2d(mix.map((row) => [...row]));
  const square = (): Float64Array => new Float64Array(n * n);
  const slots = Array.from({ length: batchSize }, () => ({
    L: square(),
    dL: Array.from({ length: m + 1 }, square),
    W: square(),
    tangents: Array.from({ length: m + 1 }, square),
    adjoint: { W: square(), tangents: Array.from({ length: m + 1 }, square) },
  }));
  let rateMomentum = 0;
  let rateVariance = 0;
  let rateSteps = 0;

  const step = (batch: readonly TrainingState[], lambda: number, learningRate: number): BatchValue => {
    const count = batch.length;
    const x = new Float32Array(count * inputs);
    const directions = new Float32Array(count * (m + 1) * inputs);
    batch.forEach((state, i) => {
      x.set(state.features, i * inputs);
      directions.set(state.featureTangents, i * (m + 1) * inputs);
    });
    let value!: BatchValue;
    const surrogate = () => {
      const out = net.valueAndTangents(
        tf.tensor2d(x, [count, inputs]),
        tf.tensor3d(directions, [count, m + 1, inputs]),
      );
      const l = tf.matMul(out.y, toFactor);
      const dl = tf.matMul(tf.reshape(out.dy, [count * (m + 1), packed]) as Tensor2D, toFactor);
      const result = adjoints(batch, l.dataSync(), dl.dataSync(), lambda);
      value = result.value;
      const onValue: Tensor2D = tf.tensor2d(result.y, [count, packed]);
      const onTangents: Tensor2D = tf.tensor2d(result.dy, [count * (m + 1), packed]);
      return tf.add(tf.sum(tf.mul(l, onValue)), tf.sum(tf.mul(dl, onTangents))) as Scalar;
    };
    tf.tidy(() => {
      const { grads, value: unused } = tf.variableGrads(surrogate, net.variables);
      unused.dispose();
      setLearningRate(optimizer, learningRate);
      optimizer.applyGradients(grads as Parameters<typeof optimizer.applyGradients>[0]);
    });
    return value;
  };

  const adjoints = (batch: readonly TrainingState[], y: ArrayLike<number>, dy: ArrayLike<number>, lambda: number) => {
    const members = batch.map((state, i): BatchMember => {
      const slot = slots[i]!;
      unpack(y, i * packed, slot.L, n);
      fromFactor(slot.L, w0, slot.W, n);
      slot.adjoint.W.fill(0);
      for (let d = 0; d <= m; d++) {
        unpack(dy, (i * (m + 1) + d) * packed, slot.dL[d]!, n);
        factorTangent(slot.L, slot.dL[d]!, slot.tangents[d]!, n);
        slot.adjoint.tangents[d]!.fill(0);
      }
      return { W: slot.W, load: () => terms.load(state, slot.W, slot.tangents), adjoint: slot.adjoint };
    });
    const value = batchObjective(terms, members, lambda, settings);
    const onY = new Float32Array(batch.length * packed);
    const onDy = new Float32Array(batch.length * (m + 1) * packed);
    batch.forEach((_, i) => {
      const { L, dL, adjoint } = slots[i]!;
      addFactorAdjoint(adjoint.W, L, onY, i * packed, n);
      for (let d = 0; d <= m; d++) {
        addFactorAdjoint(adjoint.tangents[d]!, dL[d]!, onY, i * packed, n);
        addFactorAdjoint(adjoint.tangents[d]!, L, onDy, (i * (m + 1) + d) * packed, n);
      }
    });
    return { value, y: onY, dy: onDy };
  };

  /** lambda after one step against the slope of the objective in log lambda. */
  const stepRate = (lambda: number, slope: number, learningRate: number): number => {
    rateSteps++;
    rateMomentum = 0.9 * rateMomentum + 0.1 * slope;
    rateVariance = 0.999 * rateVariance + 0.001 * slope * slope;
    const mean = rateMomentum / (1 - 0.9 ** rateSteps);
    const spread = Math.sqrt(rateVariance / (1 - 0.999 ** rateSteps)) + 1e-8;
    return lambda * Math.exp((-learningRate * mean) / spread);
  };

  return {
    step,
    stepRate,
    dispose: (): void => {
      optimizer.dispose();
      toFactor.dispose();
      net.dispose();
    },
  };
}

/** tfjs keeps Adam's rate in a protected field; a decaying rate is the usual reason to set it. */
function setLearningRate(optimizer: object, learningRate: number): void {
  (optimizer as { learningRate: number }).learningRate = learningRate;
}
