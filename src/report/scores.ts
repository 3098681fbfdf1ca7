/** The disturbance bound: calibration and test scores of whole runs against it. */
import type { Pictures, Summary } from "./artifacts.js";
import { figure, legend, lineSwatch } from "./figure.js";
import { number, plural, share } from "./format.js";
import { type Markup, markup } from "./markup.js";
import { FIRST, LIMIT, SECOND } from "./theme.js";
import { vegaChart } from "./vegaChart.js";

export async function scores(summary: Summary, { scores: { calibration, test, bound } }: Pictures): Promise<Markup> {
  if (calibration.length + test.length === 0) return markup`<p class="note">No scores of runs were saved.</p>`;
  const rows = [
    ...calibration.map((score) => ({ kind: "calibration runs", score, color: FIRST, shape: "circle" })),
    ...test.map((score) => ({
      kind: "test runs",
      score,
      color: score > bound ? LIMIT : SECOND,
      shape: score > bound ? "triangle-up" : "square",
    })),
  ];
  const above = test.filter((score) => score > bound).length;
  const x = {
    field: "score",
    type: "quantitative",
    title: "score of a run: its worst window, in scales of the fit runs",
    scale: { domain: [0, 1.08 * Math.max(bound, ...calibration, ...test)], nice: false },
  };
  const picture = await vegaChart(
    {
      layer: [
        {
          data: { values: [{ score: bound }] },
          mark: { type: "rule", color: LIMIT, strokeDash: [6, 3], strokeWidth: 2 },
          encoding: { x },
        },
        {
          data: { values: rows },
          mark: { type: "point", filled: true, size: 64, opacity: 0.75 },
          encoding: {
            x,
            y: { field: "kind", type: "nominal", title: null, axis: { labels: false, ticks: false, grid: true } },
            color: { field: "color", type: "nominal", scale: null },
            shape: { field: "shape", type: "nominal", scale: null },
          },
        },
      ],
    },
    {
      key: "scores",
      label: `Scores of ${plural(calibration.length, "calibration run")} and ${plural(test.length, "test run")} against the bound ${number(bound, "up")}; ${plural(above, "test run")} above it.`,
    },
    { height: 100, hasVerticalAxis: false },
  );
  const { confidence, testShareCovered, testRuns } = summary.disturbance;
  return figure({
    title: "Scores of whole runs against the bound",
    picture,
    legend: legend([
      { swatch: markup`<circle cx="17" cy="7" r="4.5" fill="${FIRST}"/>`, text: "calibration run (upper row)" },
      { swatch: markup`<rect x="13" y="3" width="8" height="8" fill="${SECOND}"/>`, text: "test run (lower row)" },
      ...(above === 0
        ? []
        : [{ swatch: markup`<path d="M17 2l5.5 9.5h-11Z" fill="${LIMIT}"/>`, text: "test run above the bound" }]),
      { swatch: lineSwatch(LIMIT, [6, 3]), text: `bound, ${number(bound, "up")}` },
    ]),
    shows: `One point a run. The bound comes from the calibration runs alone; ${testRuns === 0 ? "no test runs were kept" : `${share(testShareCovered)} of ${plural(testRuns, "test run")} stay under it`}, where at least ${share(confidence, "down")} is to be expected in the long run.`,
    showsNot: "Runs of another kind: other loads, ground, weather or speeds.",
  });
}
