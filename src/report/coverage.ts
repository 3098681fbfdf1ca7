/** Where the logs hold states: a histogram a state over its envelope. */
import type { CoveragePicture, Pictures } from "./artifacts.js";
import { boxSwatch, crossSwatch, figure, figures, legend } from "./figure.js";
import { plural, quantity, share } from "./format.js";
import { type Markup, markup } from "./markup.js";
import { FIRST, LIMIT } from "./theme.js";
import { axisTitle, vegaChart } from "./vegaChart.js";

type StateCoverage = CoveragePicture["states"][number];

export async function coverage({ coverage: { states } }: Pictures): Promise<Markup> {
  if (states.length === 0) return markup`<p class="note">No histogram of the logs was saved.</p>`;
  return figures(await Promise.all(states.map(histogram)));
}

async function histogram({ name, unit, edges, counts, outside }: StateCoverage, index: number): Promise<Markup> {
  const inside = counts.reduce((a, b) => a + b, 0);
  const bars = counts.map((count, i) => ({
    from: edges[i]!,
    to: edges[i + 1]!,
    count: (count / Math.max(inside, 1)) * 100,
  }));
  const empty = bars.filter(({ count }) => count === 0).map(({ from, to }) => ({ from: (from + to) / 2, count: 0 }));
  const x = {
    field: "from",
    type: "quantitative",
    title: axisTitle(name, unit),
    scale: { domain: [edges[0] ?? 0, edges.at(-1) ?? 1], nice: false, zero: false },
    axis: { grid: false },
  };
  const y = {
    field: "count",
    type: "quantitative",
    title: "samples inside (%)",
    scale: { domainMin: 0, ...(inside === 0 ? { domainMax: 1 } : {}) },
  };
  const span = edges.length < 2 ? "" : ` from ${quantity(edges[0]!, unit)} to ${quantity(edges.at(-1)!, unit)}`;
  const picture = await vegaChart(
    {
      layer: [
        {
          data: { values: bars.filter(({ count }) => count > 0) },
          mark: { type: "rect", color: FIRST, opacity: 0.85, stroke: "var(--panel)", strokeWidth: 0.5 },
          encoding: { x, x2: { field: "to" }, y, y2: { datum: 0 } },
        },
        {
          data: { values: empty },
          mark: {
            type: "point",
            shape: "M-0.7,-0.7L0.7,0.7M0.7,-0.7L-0.7,0.7",
            size: 60,
            stroke: LIMIT,
            strokeWidth: 2,
            opacity: 1,
            yOffset: -6,
          },
          encoding: { x, y },
        },
      ],
    },
    {
      key: `coverage-${index}`,
      label: `Histogram of ${name}${span}: ${plural(inside, "sample")} inside, ${outside} outside, ${empty.length} of ${plural(counts.length, "bin")} empty.`,
    },
    { height: 140, hasVerticalAxis: true },
  );
  return figure({
    title: `Logged ${name}`,
    picture,
    legend: legend([
      { swatch: boxSwatch(FIRST), text: plural(inside, "sample") },
      ...(empty.length === 0
        ? []
        : [{ swatch: crossSwatch(LIMIT), text: `empty bin (${empty.length} of ${counts.length})` }]),
    ]),
    shows: `How the logged ${name} is spread over its envelope; ${outside === 0 ? "no sample lies outside" : `${plural(outside, "sample")} (${share(outside / (inside + outside))}) outside`}.`,
    showsNot: "Combinations of states: every bin can be full and a corner of the envelope still empty.",
  });
}
