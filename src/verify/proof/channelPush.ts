/**
 * The push of each leftover channel by itself, wbar_i sqrt(g_i^T W^{-1} g_i), as upper bounds over cells. Within a window of
 * the disturbance bound the channels may be worst at different states, so that their joint supremum is not enough there.
 */
import { modelNodes } from "../../model/intervalModel.js";
import { type MetricField, metricField } from "../../nets/intervalMetric.js";
import { stepUp } from "../../num/directed.js";
import { taylorGraph } from "../../num/taylorGraph.js";
import { activeStates } from "../../plant/scaling.js";
import { cellTests, certificateNodes } from "./cellTests.js";
import type { ProofSubject } from "./claims.js";
import { conditionNodes } from "./conditionNodes.js";

export interface ChannelPush {
  /** Indices of the active coordinates that anything of the certificate depends on. */
  readonly used: readonly number[];
  /** Ends of a cell (active coordinates, scaled) -> one bound a channel, 1/s; Infinity where nothing is shown. */
  on(lower: Float64Array, upper: Float64Array): number[];
}

/** wbar: p, SI. */
export function channelPush({ plant, residual, metric: of }: ProofSubject, wbar: readonly number[]): ChannelPush {
  const graph = taylorGraph(activeStates(plant).length);
  const model = modelNodes(graph, plant, residual);
  const field: MetricField = typeof of === "function" ? of : metricField(of);
  const metric = field(graph, model.z);
  const nodes = certificateNodes(graph, conditionNodes(graph, model, metric), model, model.rotation, metric.isPositive);
  const cells = graph.evaluator("cells");
  const onCell = cellTests(cells, nodes, { rate: 0, sigma: null, spreads: [], authority: null });
  const alone = wbar.map((bound, c) => wbar.map((_, i) => (i === c ? bound : 0)));
  const on: ChannelPush["on"] = (lower, upper) => {
    const centre = lower.map((low, i) => low / 2 + upper[i]! / 2);
    const radius = centre.map((middle, i) => Math.max(0, stepUp(upper[i]! - middle), stepUp(middle - lower[i]!)));
    cells.run(centre, radius);
    if (!onCell.isRegular()) return alone.map(() => Number.POSITIVE_INFINITY);
    return alone.map((bounds) => onCell.sigma(bounds));
  };
  return { used: cells.used, on };
}
