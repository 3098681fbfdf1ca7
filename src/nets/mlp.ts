/**
 * A small network: hidden layers h = tanh(V h_prev + b), a linear last layer. Weights are plain JSON numbers.
 * Shapes: weights of a layer are [outputs][inputs].
 */
export interface Layer {
  readonly weights: readonly (readonly number[])[];
  readonly bias: readonly number[];
}

export interface Mlp {
  readonly layers: readonly Layer[];
}

/** Float64 evaluation; owns its work space, so one evaluator a worker. */
export interface MlpEvaluator {
  readonly inputs: number;
  readonly outputs: number;
  /** y(s) into out (outputs). */
  value(s: Float64Array, out: Float64Array): void;
  /**
   * y(s) into out and `count` directional derivatives into tangents (count x outputs); directions is count x inputs.
   */
  valueAndTangents(
    s: Float64Array,
    directions: Float64Array,
    count: number,
    out: Float64Array,
    tangents: Float64Array,
  ): void;
}

interface FlatLayer {
  readonly rows: number;
  readonly cols: number;
  readonly weights: Float64Array;
  readonly bias: Float64Array;
}

const EMPTY = new Float64Array(0);

export function mlpEvaluator(mlp: Mlp): MlpEvaluator {
  const layers = mlp.layers.map(flatten);
  const inputs = layers[0]!.cols;
  const outputs = layers.at(-1)!.rows;
  const widest = Math.max(inputs, ...layers.map((l) => l.rows));
  const values = [new Float64Array(widest), new Float64Array(widest)] as const;
  let slopes = [EMPTY, EMPTY] as const;

  const valueAndTangents: MlpEvaluator["valueAndTangents"] = (s, directions, count, out, tangents) => {
    if (slopes[0].length < count * widest) {
      slopes = [new Float64Array(count * widest), new Float64Array(count * widest)];
    }
    let h = s;
    let t = directions;
    layers.forEach((layer, index) => {
      const last = index === layers.length - 1;
      const next = last ? out : values[(index & 1) as 0 | 1];
      const nextT = last ? tangents : slopes[(index & 1) as 0 | 1];
      affine(layer, h, next);
      for (let c = 0; c < count; c++) linear(layer, t, c * layer.cols, nextT, c * layer.rows);
      if (!last) {
        for (let i = 0; i < layer.rows; i++) {
          const a = Math.tanh(next[i]!);
          next[i] = a;
          const slope = 1 - a * a;
          for (let c = 0; c < count; c++) nextT[c * layer.rows + i]! *= slope;
        }
      }
      h = next;
      t = nextT;
    });
  };
  return {
    inputs,
    outputs,
    value: (s, out) => valueAndTangents(s, EMPTY, 0, out, EMPTY),
    valueAndTangents,
  };
}

function flatten(layer: Layer): FlatLayer {
  return {
    rows: layer.weights.length,
    cols: layer.weights[0]!.length,
    weights: Float64Array.from(layer.weights.flat()),
    bias: Float64Array.from(layer.bias),
  };
}

function affine(layer: FlatLayer, x: Float64Array, y: Float64Array): void {
  linear(layer, x, 0, y, 0);
  for (let i = 0; i < layer.rows; i++) y[i]! += layer.bias[i]!;
}

function linear(layer: FlatLayer, x: Float64Array, from: number, y: Float64Array, to: number): void {
  const { rows, cols, weights } = layer;
  for (let i = 0; i < rows; i++) {
    let sum = 0;
    for (let j = 0, w = i * cols; j < cols; j++, w++) sum += weights[w]! * x[from + j]!;
    y[to + i] = sum;
  }
}
