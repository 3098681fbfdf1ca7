/** The asked margin of every certificate side by side; one without a margin has its reason and no bar. */
import type { Summary } from "./artifacts.js";
import { askedMargin, goalWords, STATUS_WORDS } from "./certificateWords.js";
import { figure } from "./figure.js";
import { quantity } from "./format.js";
import type { Markup } from "./markup.js";
import { certificateStyle } from "./theme.js";
import { axisTitle, vegaChart } from "./vegaChart.js";

const ROW = 46;

export async function marginBars(summary: Summary): Promise<Markup> {
  const { goal, certificates } = summary;
  const rows = certificates.map((certificate, i) => {
    const margin = askedMargin(summary, certificate);
    const { mark, words } = STATUS_WORDS[certificate.status];
    return {
      // the row's place, not its title: titles need not differ
      row: i,
      margin,
      color: certificateStyle(certificate.name).color,
      title: certificate.title,
      value: margin === null ? `${mark} ${words}: no margin` : quantity(margin, goal.unit, "up"),
    };
  });
  const largest = Math.max(0, ...rows.map(({ margin }) => margin ?? 0));
  // room for the number beside the longest bar
  const end = largest > 0 ? 1.3 * largest : 1;
  const band = {
    field: "row",
    type: "ordinal",
    axis: null,
    scale: { paddingInner: 0.62, paddingOuter: 0.62 },
  } as const;
  // without any margin there is nothing to measure off an axis
  const axis = largest > 0 ? {} : { axis: null };
  const length = { type: "quantitative", scale: { domain: [0, end], nice: false }, ...axis } as const;
  const picture = await vegaChart(
    {
      data: { values: rows },
      layer: [
        {
          transform: [{ filter: "datum.margin !== null" }],
          mark: { type: "bar" },
          encoding: {
            y: band,
            x: { ...length, field: "margin", title: axisTitle(`margin '${goal.name}'`, goal.unit) },
            color: { field: "color", type: "nominal", scale: null },
          },
        },
        {
          mark: { type: "text", align: "left", baseline: "bottom", dy: -11 },
          encoding: { y: band, x: { ...length, datum: 0 }, text: { field: "title" } },
        },
        {
          transform: [{ filter: "datum.margin !== null" }],
          mark: { type: "text", align: "left", dx: 6, fontWeight: 600 },
          encoding: { y: band, x: { ...length, field: "margin" }, text: { field: "value" } },
        },
        {
          transform: [{ filter: "datum.margin === null" }],
          mark: { type: "text", align: "left", dx: 2, fontStyle: "italic" },
          encoding: { y: band, x: { ...length, datum: 0 }, text: { field: "value" } },
        },
      ],
    },
    {
      key: "margin-bars",
      label: `Bars of the asked margin. ${rows.map(({ title, value }) => `${title}: ${value}`).join("; ")}.`,
    },
    { height: ROW * Math.max(rows.length, 1), hasVerticalAxis: false },
  );
  return figure({
    title: `Asked ${goalWords(summary)}`,
    picture,
    shows:
      "The distance a planner must keep, by certificate; shorter is better. Every bar uses the same meaning of disturbance: a new run of the same kind.",
    showsNot: "A margin for a certificate that fails, or outside the part of the envelope given for plans.",
  });
}
