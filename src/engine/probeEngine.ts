/**
 * How far an engine is off the float64 code on a small network: value, tangents, and the gradient of a scalar of both
 * (against central differences), the largest error relative to the largest value of each kind.
 */
import type * as Tf from "@tensorflow/tfjs-core";
import { type Mlp, mlpEvaluator } from "../nets/mlp.js";
import { seededRandom } from "../num/random.js";
import { initialMlp, trainableMlp } from "./trainableMlp.js";

const [BATCH, INPUTS, ALONG, OUTPUTS] = [8, 3, 2, 4];

export function probeEngine(tf: typeof Tf): number {
  const random = seededRandom(1);
  const mlp = initialMlp([INPUTS, 6, 6, OUTPUTS], random, 1);
  const x = Float64Array.from({ length: BATCH * INPUTS }, () => Math.fround(random.normal()));
  const d = Float64Array.from({ length: BATCH * ALONG * INPUTS }, () => Math.fround(random.normal()));
  const expected = reference(mlp, x, d);
  const net = trainableMlp(tf, mlp);
  const weights = mlp.layers[0]!.weights;
  let y: ArrayLike<number> = [];
  let dy: ArrayLike<number> = [];
  let gradient: ArrayLike<number> = [];
  tf.tidy(() => {
    const scalar = (): Tf.Scalar => {
      const out = net.valueAndTangents(
        tf.tensor2d(Float32Array.from(x), [BATCH, INPUTS]),
        tf.tensor3d(Float32Array.from(d), [BATCH, ALONG, INPUTS]),
      );
      y = out.y.dataSync().slice();
      dy = out.dy.dataSync().slice();
      return tf.add(tf.sum(tf.mul(out.y, out.y)), tf.sum(out.dy)) as Tf.Scalar;
    };
    const { grads } = tf.variableGrads(scalar, net.variables);
    gradient = grads[net.variables[0]!.name]!.dataSync().slice();
  });
  net.dispose();
  const numeric: number[] = [];
  const step = 1e-5;
  for (let i = 0; i < INPUTS; i++) {
    for (let o = 0; o < weights.length; o++) {
      const at = (delta: number): number => scalarOf(reference(shifted(mlp, o, i, delta), x, d));
      numeric.push((at(step) - at(-step)) / (2 * step));
    }
  }
  return Math.max(relative(y, expected.y), relative(dy, expected.dy), relative(gradient, numeric));
}

function reference(mlp: Mlp, x: Float64Array, d: Float64Array) {
  const net = mlpEvaluator(mlp);
  const y = new Float64Array(BATCH * OUTPUTS);
  const dy = new Float64Array(BATCH * ALONG * OUTPUTS);
  for (let b = 0; b < BATCH; b++) {
    net.valueAndTangents(
      x.subarray(b * INPUTS, (b + 1) * INPUTS),
      d.subarray(b * ALONG * INPUTS, (b + 1) * ALONG * INPUTS),
      ALONG,
      y.subarray(b * OUTPUTS, (b + 1) * OUTPUTS),
      dy.subarray(b * ALONG * OUTPUTS, (b + 1) * ALONG * OUTPUTS),
    );
  }
  return { y, dy };
}

function scalarOf({ y, dy }: { y: Float64Array; dy: Float64Array }): number {
  return y.reduce((sum, value) => sum + value * value, 0) + dy.reduce((sum, value) => sum + value, 0);
}

/** The network with one weight of its first layer moved. */
function shifted(mlp: Mlp, row: number, col: number, delta: number): Mlp {
  const [first, ...rest] = mlp.layers;
  const weights = first!.weights.map((w, i) => (i === row ? w.map((v, j) => (j === col ? v + delta : v)) : w));
  return { layers: [{ ...first!, weights }, ...rest] };
}

function relative(found: ArrayLike<number>, expected: ArrayLike<number>): number {
  let error = 0;
  let size = 0;
  for (let i = 0; i < expected.length; i++) {
    error = Math.max(error, Math.abs(found[i]! - expected[i]!));
    size = Math.max(size, Math.abs(expected[i]!));
  }
  return Number.isFinite(error) ? error / size : Number.POSITIVE_INFINITY;
}
