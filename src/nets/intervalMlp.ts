/**
 * A network (mlp.ts) over cells: value and tangents of every output as Taylor models, one step of a graph. A layer is one
 * matrix product on rows [value | tangent 0 | tangent 1 | ..]; the remainders go through the sizes of the weights:
 *   e_i = sum_j |w_ij| (e_j + (cols + 12) u size_j),   size_j the sum of the sizes of the model's coefficients,
 * which covers the rounding of every coefficient (taylorModel.ts). A tangent passes tanh as slope(h) times tangent, the
 * slope 1 - tanh^2 having an expansion of its own.
 */
import { U } from "../num/directed.js";
import { newExpansion, tanhExpansion, tanhSlopeExpansion } from "../num/taylorFunctions.js";
import { type Node, type Step, type TaylorGraph, ZERO } from "../num/taylorGraph.js";
import { GROW, type TaylorKernel, TINY } from "../num/taylorModel.js";
import type { Mlp } from "./mlp.js";

export interface MlpNodes {
  readonly values: readonly Node[];
  /** [direction][output]. */
  readonly tangents: readonly (readonly Node[])[];
}

interface FlatLayer {
  readonly rows: number;
  readonly cols: number;
  readonly weights: Float64Array;
  readonly sizes: Float64Array;
  readonly bias: Float64Array;
}

/** inputs: one node a network input; directions: the inputs' derivatives along each direction, ZERO where none. */
export function mlpNodes(
  graph: TaylorGraph,
  mlp: Mlp,
  inputs: readonly Node[],
  directions: readonly (readonly Node[])[],
): MlpNodes {
  const layers = mlp.layers.map((layer): FlatLayer => {
    const weights = Float64Array.from(layer.weights.flat());
    if (![...weights, ...layer.bias].every(Number.isFinite))
      throw new Error("a network holds a weight that is not a finite number; nothing can be proved about it");
    return {
      rows: layer.weights.length,
      cols: layer.weights[0]!.length,
      weights,
      sizes: weights.map(Math.abs),
      bias: Float64Array.from(layer.bias),
    };
  });
  const outputs = layers.at(-1)!.rows;
  const parts = 1 + directions.length;
  const nodes: Node[] = [];
  nodes.push(
    ...graph.custom(outputs * parts, (kernel, at) =>
      networkStep(
        kernel,
        layers,
        [inputs, ...directions],
        (node) => (node === ZERO ? -1 : at(node)),
        () => nodes.map(at),
      ),
    ),
  );
  return {
    values: nodes.slice(0, outputs),
    tangents: directions.map((_, c) => nodes.slice((c + 1) * outputs, (c + 2) * outputs)),
  };
}

function networkStep(
  kernel: TaylorKernel,
  layers: readonly FlatLayer[],
  inputs: readonly (readonly Node[])[],
  at: (node: Node) => number,
  targets: () => readonly number[],
): Step {
  const { size } = kernel;
  const parts = inputs.length;
  const row = parts * size;
  const widest = Math.max(layers[0]!.cols, ...layers.map((l) => l.rows));
  // two buffers of rows in one array, so that the kernel can work between them; one spare model for the slope
  const work = new Float64Array((2 * widest + 1) * row);
  const spare = 2 * widest * row;
  const errors = new Float64Array(widest * parts);
  const phi = newExpansion();
  const from = inputs.map((part) => part.map(at));
  const to = targets();
  const outputs = layers.at(-1)!.rows;

  const linear = (layer: FlatLayer, input: number, output: number): void => {
    const { rows, cols, weights, sizes, bias } = layer;
    for (let j = 0; j < cols; j++) {
      for (let part = 0; part < parts; part++) {
        const o = input + j * row + part * size;
        let absolute = 0;
        for (let k = 0; k < size - 1; k++) absolute += Math.abs(work[o + k]!);
        errors[j * parts + part] = work[o + size - 1]! + (cols + 12) * U * absolute;
      }
    }
    for (let i = 0; i < rows; i++) {
      const o = output + i * row;
      for (let k = 0; k < row; k++) work[o + k] = 0;
      // four columns at a time: fewer passes over the row; the bound holds for any order of the sum
      let j = 0;
      for (; j + 3 < cols; j += 4) {
        const at = i * cols + j;
        const x = input + j * row;
        const [a, b, c, d] = [weights[at]!, weights[at + 1]!, weights[at + 2]!, weights[at + 3]!];
        for (let k = x; k < x + row; k++)
          work[o + k - x]! += a * work[k]! + b * work[k + row]! + (c * work[k + 2 * row]! + d * work[k + 3 * row]!);
      }
      for (; j < cols; j++) {
        const w = weights[i * cols + j]!;
        const x = input + j * row;
        for (let k = 0; k < row; k++) work[o + k]! += w * work[x + k]!;
      }
      for (let part = 0; part < parts; part++) {
        let error = part === 0 ? (cols + 12) * U * Math.abs(bias[i]!) : 0;
        for (let j = 0; j < cols; j++) error += sizes[i * cols + j]! * errors[j * parts + part]!;
        work[o + part * size + size - 1] = error * GROW + TINY;
      }
      work[o]! += bias[i]!;
    }
  };

  const activate = (rows: number, input: number, output: number): void => {
    for (let i = 0; i < rows; i++) {
      const o = input + i * row;
      const spread = kernel.spread(work, o);
      const c = work[o]!;
      tanhExpansion(c, spread, phi);
      kernel.compose(work, o, spread, phi, output + i * row);
      tanhSlopeExpansion(c, spread, phi);
      kernel.compose(work, o, spread, phi, spare);
      for (let part = 1; part < parts; part++) {
        kernel.product(work, o + part * size, spare, output + i * row + part * size);
      }
    }
  };

  return (M) => {
    work.fill(0, 0, layers[0]!.cols * row);
    from.forEach((part, p) => {
      part.forEach((offset, j) => {
        if (offset >= 0) for (let k = 0; k < size; k++) work[j * row + p * size + k] = M[offset + k]!;
      });
    });
    const [front, back] = [0, widest * row];
    layers.forEach((layer, l) => {
      linear(layer, front, back);
      if (l < layers.length - 1) activate(layer.rows, back, front);
    });
    for (let p = 0; p < parts; p++) {
      for (let i = 0; i < outputs; i++) {
        const o = back + i * row + p * size;
        const target = to[p * outputs + i]!;
        for (let k = 0; k < size; k++) M[target + k] = work[o + k]!;
      }
    }
  };
}
