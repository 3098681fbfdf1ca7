import type { BodyFrame, ControlAffineModel } from "../../src/model/controlAffine.js";
import type { DualMetricFile } from "../../src/nets/dualMetric.js";
import type { Feature } from "../../src/nets/features.js";
import type { Mlp } from "../../src/nets/mlp.js";
import type { Random } from "../../src/num/random.js";
import { handModel } from "./handModel.js";

/** A random smooth control-affine system: quadratic f, B linear in the state. */
export function randomModel(random: Random, n: number, m: number, p: number, rotation?: BodyFrame): ControlAffineModel {
  const table = (rows: number, cols: number, scale: number): number[][] =>
    Array.from({ length: rows }, () => Array.from({ length: cols }, () => scale * random.normal()));
  const [A, H, B0, B1, G] = [table(n, n, 0.7), table(n, n, 0.2), table(n, m, 1), table(n, m, 0.2), table(n, p, 0.3)];
  const fixed = new Set<number>(rotation === undefined ? [] : [...rotation.position, rotation.heading]);
  const free = Array.from({ length: n }, (_, i) => i).filter((i) => !fixed.has(i));
  return handModel({
    n,
    m,
    p,
    active: free,
    ...(rotation === undefined ? {} : { rotation }),
    f: (z) => A.map((row, i) => row.reduce((sum, a, j) => sum + a * z[j]! + H[i]![j]! * z[j]! * z[(i + j) % n]!, 0)),
    B: (z) => B0.map((row, i) => row.map((b, j) => b + B1[i]![j]! * z[free[j % free.length]!]!)),
    G: () => G,
  });
}

export function randomMlp(random: Random, sizes: readonly number[], scale = 1): Mlp {
  return {
    layers: sizes.slice(1).map((rows, l) => ({
      weights: Array.from({ length: rows }, () =>
        Array.from({ length: sizes[l]! }, () => (scale * random.normal()) / Math.sqrt(sizes[l]!)),
      ),
      bias: Array.from({ length: rows }, () => 0.3 * random.normal()),
    })),
  };
}

export function randomNetworkMetric(
  random: Random,
  n: number,
  states: readonly number[],
  width: number,
): DualMetricFile {
  const features: Feature[] = states.map((state) => ({ state, map: "value", center: 0, half: 1 }));
  return {
    kind: "network",
    n,
    w0: 0.3,
    features,
    mlp: randomMlp(random, [states.length, width, width, (n * (n + 1)) / 2]),
  };
}
