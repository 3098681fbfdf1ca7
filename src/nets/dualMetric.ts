/**
 * The dual metric W(z), symmetric positive definite, in scaled states z (n). With a declared rotation it is the body
 * frame's What(z), independent of position and heading.
 *   constant: W
 *   network:  W(z) = w0 I + L(z) L(z)^T, L lower-triangular; the network's n(n+1)/2 outputs fill L by rows
 *             (L00, L10, L11, L20, ...).
 * The saved form is plain JSON.
 */
import { type Feature, featureSlope, featureValue } from "./features.js";
import { type Mlp, mlpEvaluator } from "./mlp.js";

export type DualMetricFile =
  | { readonly kind: "constant"; readonly n: number /** n x n, row-major. */; readonly W: readonly number[] }
  | {
      readonly kind: "network";
      readonly n: number;
      readonly w0: number;
      readonly features: readonly Feature[];
      readonly mlp: Mlp;
    };

/** Float64 evaluation; owns its work space. */
export interface DualMetric {
  readonly n: number;
  /** States that W depends on. */
  readonly dependsOn: readonly number[];
  /**
   * W at z into W (n x n) and its derivative along each of `count` state directions (count x n) into dW
   * (count x n x n).
   */
  evaluate(z: Float64Array, directions: Float64Array, count: number, W: Float64Array, dW: Float64Array): void;
}

export function dualMetric(file: DualMetricFile): DualMetric {
  return file.kind === "constant" ? constantMetric(file.n, file.W) : networkMetric(file);
}

function constantMetric(n: number, values: readonly number[]): DualMetric {
  return {
    n,
    dependsOn: [],
    evaluate: (_z, _directions, count, W, dW) => {
      W.set(values);
      dW.fill(0, 0, count * n * n);
    },
  };
}

function networkMetric(file: Extract<DualMetricFile, { kind: "network" }>): DualMetric {
  const { n, w0, features } = file;
  const net = mlpEvaluator(file.mlp);
  const outputs = (n * (n + 1)) / 2;
  const s = new Float64Array(features.length);
  const l = new Float64Array(outputs);
  let ds = new Float64Array(0);
  let dl = new Float64Array(0);
  return {
    n,
    dependsOn: [...new Set(features.map((f) => f.state))],
    evaluate: (z, directions, count, W, dW) => {
      if (ds.length < count * features.length) {
        ds = new Float64Array(count * features.length);
        dl = new Float64Array(count * outputs);
      }
      features.forEach((feature, k) => {
        const zi = z[feature.state]!;
        s[k] = featureValue(feature, zi);
        const slope = featureSlope(feature, zi);
        for (let c = 0; c < count; c++) ds[c * features.length + k] = slope * directions[c * n + feature.state]!;
      });
      net.valueAndTangents(s, ds, count, l, dl);
      for (let i = 0; i < n; i++) {
        for (let j = 0; j <= i; j++) {
          W[i * n + j] = W[j * n + i] = rowProduct(l, 0, l, 0, i, j) + (i === j ? w0 : 0);
          for (let c = 0; c < count; c++) {
            const o = c * outputs;
            const at = c * n * n;
            dW[at + i * n + j] = dW[at + j * n + i] = rowProduct(dl, o, l, 0, i, j) + rowProduct(l, 0, dl, o, i, j);
          }
        }
      }
    },
  };
}

/** Row i of one packed lower-triangular matrix times row j of another. */
function rowProduct(a: Float64Array, ao: number, b: Float64Array, bo: number, i: number, j: number): number {
  const ai = ao + (i * (i + 1)) / 2;
  const bj = bo + (j * (j + 1)) / 2;
  let sum = 0;
  for (let k = 0; k <= Math.min(i, j); k++) sum += a[ai + k]! * b[bj + k]!;
  return sum;
}
