import type * as Tf from "@tensorflow/tfjs-core";
import { beforeAll, describe, expect, it } from "vitest";
import { type Engine, openEngine } from "../../src/engine/openEngine.js";
import { initialMlp, trainableMlp } from "../../src/engine/trainableMlp.js";
import { mlpEvaluator } from "../../src/nets/mlp.js";
import { seededRandom } from "../../src/num/random.js";

let engine: Engine;
beforeAll(async () => {
  engine = await openEngine();
});

const SIZES = [3, 8, 8, 2];
const ROWS = 5;
const ALONG = 4;

describe("initial weights", () => {
  it("have variance 1/inputs, zero biases and a scaled last layer", () => {
    const mlp = initialMlp([40, 60, 30], seededRandom(3), 0.1);
    const variance = (l: number): number => {
      const all = mlp.layers[l]!.weights.flat();
      return all.reduce((sum, w) => sum + w * w, 0) / all.length;
    };
    expect(variance(0) * 40).toBeGreaterThan(0.9);
    expect(variance(0) * 40).toBeLessThan(1.1);
    expect(variance(1) * 60).toBeGreaterThan(0.009);
    expect(variance(1) * 60).toBeLessThan(0.011);
    expect(mlp.layers.flatMap((layer) => layer.bias).every((b) => b === 0)).toBe(true);
    expect(initialMlp([40, 60, 30], seededRandom(3), 0.1)).toEqual(mlp);
  });
});

describe("trainable network", () => {
  it("agrees with the float64 evaluation in value and tangents", () => {
    const { tf } = engine;
    const random = seededRandom(4);
    const mlp = initialMlp(SIZES, random, 1);
    const x = Array.from({ length: ROWS * 3 }, () => random.normal());
    const d = Array.from({ length: ROWS * ALONG * 3 }, () => random.normal());
    const net = trainableMlp(tf, mlp);
    const found = tf.tidy(() => {
      const inputs = tf.tensor2d(x, [ROWS, 3]);
      const { y, dy } = net.valueAndTangents(inputs, tf.tensor3d(d, [ROWS, ALONG, 3]));
      expect(y.shape).toEqual([ROWS, 2]);
      expect(dy.shape).toEqual([ROWS, ALONG, 2]);
      return { y: y.dataSync(), dy: dy.dataSync(), value: net.value(inputs).dataSync() };
    });
    net.dispose();
    const truth = mlpEvaluator(mlp);
    for (let row = 0; row < ROWS; row++) {
      const y = new Float64Array(2);
      const dy = new Float64Array(ALONG * 2);
      truth.valueAndTangents(
        Float64Array.from(x.slice(row * 3, row * 3 + 3)),
        Float64Array.from(d.slice(row * ALONG * 3, (row + 1) * ALONG * 3)),
        ALONG,
        y,
        dy,
      );
      y.forEach((value, i) => {
        expect(found.y[row * 2 + i]).toBeCloseTo(value, 5);
        expect(found.value[row * 2 + i]).toBeCloseTo(value, 5);
      });
      dy.forEach((value, i) => {
        expect(found.dy[row * ALONG * 2 + i]).toBeCloseTo(value, 5);
      });
    }
  });

  it("gives its weights back as they went in, to float32, and frees every tensor", () => {
    const { tf } = engine;
    const before = tf.memory().numTensors;
    const mlp = initialMlp(SIZES, seededRandom(5), 1);
    const net = trainableMlp(tf, mlp);
    expect(net.variables).toHaveLength(6);
    expect(net.toMlp()).toEqual({
      layers: mlp.layers.map(({ weights, bias }) => ({ weights: weights.map((row) => row.map(Math.fround)), bias })),
    });
    net.dispose();
    expect(tf.memory().numTensors).toBe(before);
  });

  it("learns a sine and its slope together by gradient steps", () => {
    const { tf } = engine;
    const before = tf.memory().numTensors;
    const net = trainableMlp(tf, initialMlp([1, 16, 1], seededRandom(6), 0.1));
    const optimizer = tf.train.adam(0.02);
    const points = Array.from({ length: 40 }, (_, i) => -2 + i / 10);
    const loss = (): Tf.Scalar => {
      const { y, dy } = net.valueAndTangents(
        tf.tensor2d(points, [40, 1]),
        tf.tensor3d(new Array<number>(40).fill(1), [40, 1, 1]),
      );
      const [value, slope] = [points.map(Math.sin), points.map(Math.cos)];
      return tf.add(
        tf.sum(tf.square(tf.sub(y, tf.tensor2d(value, [40, 1])))),
        tf.sum(tf.square(tf.sub(dy, tf.tensor3d(slope, [40, 1, 1])))),
      ) as Tf.Scalar;
    };
    for (let step = 0; step < 400; step++) {
      tf.tidy(() => {
        const { grads } = tf.variableGrads(loss, net.variables);
        optimizer.applyGradients(grads as Parameters<typeof optimizer.applyGradients>[0]);
      });
    }
    const truth = mlpEvaluator(net.toMlp());
    const y = new Float64Array(1);
    for (const x of points) {
      truth.value(Float64Array.of(x), y);
      expect(Math.abs(y[0]! - Math.sin(x))).toBeLessThan(0.03);
    }
    optimizer.dispose();
    net.dispose();
    expect(tf.memory().numTensors).toBe(before);
  });
});
