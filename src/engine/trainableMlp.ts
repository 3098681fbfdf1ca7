/**
 * The trainable face of a small tanh network (src/nets/mlp.ts): value and directional derivatives as differentiable
 * tensors, float32. y = V_L tanh(... tanh(V_1 x + b_1) ...) + b_L; a tangent goes through each layer as t -> V t, times
 * 1 - tanh^2 after a hidden one.
 */
import type * as Tf from "@tensorflow/tfjs-core";
import type { Layer, Mlp } from "../nets/mlp.js";
import type { Random } from "../num/random.js";

/**
 * Weights uniform with variance 1/inputs (LeCun et al., "Efficient BackProp", 1998), biases zero, the last layer's
 * weights times `lastScale`. sizes: inputs, hidden widths, outputs.
 */
export function initialMlp(sizes: readonly number[], random: Random, lastScale: number): Mlp {
  return {
    layers: sizes.slice(1).map((rows, l): Layer => {
      const cols = sizes[l]!;
      const scale = Math.sqrt(3 / cols) * (l === sizes.length - 2 ? lastScale : 1);
      return {
        weights: Array.from({ length: rows }, () =>
          Array.from({ length: cols }, () => scale * (2 * random.uniform() - 1)),
        ),
        bias: new Array<number>(rows).fill(0),
      };
    }),
  };
}

export interface TrainableMlp {
  readonly variables: Tf.Variable[];
  /** x [N, in] -> y [N, out]. */
  value(x: Tf.Tensor2D): Tf.Tensor2D;
  /** x [N, in], directions [N, D, in] -> y [N, out], dy [N, D, out]. */
  valueAndTangents(x: Tf.Tensor2D, directions: Tf.Tensor3D): { readonly y: Tf.Tensor2D; readonly dy: Tf.Tensor3D };
  toMlp(): Mlp;
  dispose(): void;
}

export function trainableMlp(tf: typeof Tf, mlp: Mlp): TrainableMlp {
  // kept as [in, out], so that a batch of rows multiplies from the left
  const layers = mlp.layers.map((layer) =>
    // a tidy keeps its variables and frees what they were made from
    tf.tidy(() => ({
      weights: tf.variable(tf.transpose(tf.tensor2d(layer.weights.map((row) => [...row])))) as Tf.Variable<Tf.Rank.R2>,
      bias: tf.variable(tf.tensor1d([...layer.bias])) as Tf.Variable<Tf.Rank.R1>,
    })),
  );
  const isLast = (l: number): boolean => l === layers.length - 1;
  const value = (x: Tf.Tensor2D): Tf.Tensor2D =>
    layers.reduce<Tf.Tensor2D>((h, { weights, bias }, l) => {
      const a = tf.add(tf.matMul(h, weights), bias) as Tf.Tensor2D;
      return isLast(l) ? a : tf.tanh(a);
    }, x);
  const valueAndTangents: TrainableMlp["valueAndTangents"] = (x, directions) => {
    const [count, along] = directions.shape;
    let h = x;
    let t = tf.reshape(directions, [count * along, directions.shape[2]]) as Tf.Tensor2D;
    layers.forEach(({ weights, bias }, l) => {
      const a = tf.add(tf.matMul(h, weights), bias) as Tf.Tensor2D;
      t = tf.matMul(t, weights);
      if (isLast(l)) {
        h = a;
        return;
      }
      h = tf.tanh(a);
      const width = weights.shape[1];
      const slope = tf.reshape(tf.sub(1, tf.mul(h, h)), [count, 1, width]);
      t = tf.reshape(tf.mul(tf.reshape(t, [count, along, width]), slope), [count * along, width]) as Tf.Tensor2D;
    });
    return { y: h, dy: tf.reshape(t, [count, along, h.shape[1]]) as Tf.Tensor3D };
  };
  return {
    variables: layers.flatMap(({ weights, bias }): Tf.Variable[] => [weights, bias]),
    value,
    valueAndTangents,
    toMlp: () => ({
      layers: layers.map(({ weights, bias }) => ({
        weights: tf.tidy(() => tf.transpose(weights).arraySync()) as number[][],
        bias: bias.arraySync() as number[],
      })),
    }),
    dispose: () => {
      for (const { weights, bias } of layers) {
        weights.dispose();
        bias.dispose();
      }
    },
  };
}
