/**
 * A dual metric as nodes of a Taylor graph: W and its partial derivatives in scaled states. The saved networks and
 * constants of dualMetric.ts, and for tests any other field that can say the same.
 */
import type { Node, TaylorGraph } from "../num/taylorGraph.js";
import { ZERO } from "../num/taylorGraph.js";
import type { DualMetricFile } from "./dualMetric.js";
import type { Feature } from "./features.js";
import { mlpNodes } from "./intervalMlp.js";

export interface MetricNodes {
  readonly n: number;
  /** n x n, symmetric. */
  readonly W: readonly Node[];
  /** dW/dz_state for every state that W depends on. */
  readonly slopes: readonly { readonly state: number; readonly dW: readonly Node[] }[];
  /** True when W > 0 at every state by its form alone; else each cell has to show it. */
  readonly isPositive: boolean;
}

/** z: scaled states as nodes. */
export type MetricField = (graph: TaylorGraph, z: readonly Node[]) => MetricNodes;

export function metricField(file: DualMetricFile): MetricField {
  return file.kind === "constant" ? constantField(file.n, file.W) : networkField(file);
}

function constantField(n: number, W: readonly number[]): MetricField {
  return (graph) => ({ n, W: W.map((value) => graph.constant(value)), slopes: [], isPositive: false });
}

/** Value of a feature and its derivative in z_state as nodes. */
export function featureNodes(graph: TaylorGraph, feature: Feature, z: readonly Node[]): { value: Node; slope: Node } {
  const at = z[feature.state]!;
  if (feature.map === "value") return { value: at, slope: graph.constant(1) };
  const { center, half } = feature;
  const angle = graph.sum([{ weight: half, left: at }], center);
  const [sin, cos] = [graph.apply("sin", angle), graph.apply("cos", angle)];
  return feature.map === "sin"
    ? { value: sin, slope: graph.sum([{ weight: half, left: cos }]) }
    : { value: cos, slope: graph.sum([{ weight: -half, left: sin }]) };
}

/** A network of features: values, and tangents along each state that a feature reads. */
export function featureNetwork(
  graph: TaylorGraph,
  mlp: Parameters<typeof mlpNodes>[1],
  features: readonly Feature[],
  z: readonly Node[],
) {
  const states = [...new Set(features.map((f) => f.state))];
  const nodes = features.map((feature) => featureNodes(graph, feature, z));
  const directions = states.map((state) => nodes.map(({ slope }, k) => (features[k]!.state === state ? slope : ZERO)));
  return {
    states,
    ...mlpNodes(
      graph,
      mlp,
      nodes.map(({ value }) => value),
      directions,
    ),
  };
}

/** W = w0 I + L L^T; w0 > 0 makes it positive definite whatever L is. */
function networkField(file: Extract<DualMetricFile, { kind: "network" }>): MetricField {
  const { n, w0 } = file;
  const packed = (i: number, k: number): number => (i * (i + 1)) / 2 + k;
  return (graph, z) => {
    const net = featureNetwork(graph, file.mlp, file.features, z);
    const L = net.values;
    const W: Node[] = new Array<Node>(n * n).fill(ZERO);
    const slopes = net.states.map((state) => ({ state, dW: new Array<Node>(n * n).fill(ZERO) }));
    for (let i = 0; i < n; i++) {
      for (let j = 0; j <= i; j++) {
        const columns = Array.from({ length: j + 1 }, (_, k) => k);
        const product = (a: readonly Node[], b: readonly Node[]) =>
          columns.map((k) => ({ weight: 1, left: a[packed(i, k)]!, right: b[packed(j, k)]! }));
        W[i * n + j] = W[j * n + i] = graph.sum(product(L, L), i === j ? w0 : 0);
        slopes.forEach(({ dW }, c) => {
          const dL = net.tangents[c]!;
          dW[i * n + j] = dW[j * n + i] = graph.sum([...product(dL, L), ...product(L, dL)]);
        });
      }
    }
    return { n, W, slopes, isPositive: w0 > 0 };
  };
}
