/** The missing dynamics: the fitted terms along their states, and what they bring on runs that the fit never saw. */
import type { Pictures, ResidualCurve, Summary } from "./artifacts.js";
import { dotSwatch, figure, figures, legend, lineSwatch } from "./figure.js";
import { number, quantity, share } from "./format.js";
import { type Markup, markup } from "./markup.js";
import { FIRST, MUTED, SECOND } from "./theme.js";
import { axisTitle, vegaChart } from "./vegaChart.js";

export async function residualFigures(summary: Summary, pictures: Pictures): Promise<Markup> {
  const bars = await errorBars(summary);
  const curves = await Promise.all(pictures.residual.map(curveFigure));
  if (curves.length === 0 && bars === null)
    return markup`<p class="note">The plant declares no unknown term, so there is no residual.</p>`;
  return figures([...(bars === null ? [] : [bars]), ...curves]);
}

async function errorBars({ residual }: Summary): Promise<Markup | null> {
  if (residual.channels.length === 0) return null;
  const rows = residual.channels.map(({ name, unit, rmsePrior, rmseFitted }, i) => {
    const ratio = rmsePrior > 0 ? rmseFitted / rmsePrior : null;
    return {
      row: i,
      ratio: ratio === null ? 0 : 100 * ratio,
      title: name,
      value: `${number(rmseFitted)} of ${quantity(rmsePrior, unit)}${ratio === null ? "" : ` (${share(ratio)})`}`,
    };
  });
  const end = 1.05 * Math.max(100, ...rows.map(({ ratio }) => ratio));
  const band = {
    field: "row",
    type: "ordinal",
    axis: null,
    scale: { paddingInner: 0.62, paddingOuter: 0.62 },
  } as const;
  const x = { type: "quantitative", scale: { domain: [0, end], nice: false } } as const;
  const picture = await vegaChart(
    {
      data: { values: rows },
      layer: [
        {
          mark: { type: "bar", color: FIRST },
          encoding: {
            y: band,
            x: { ...x, field: "ratio", title: "error of the fitted model (% of the prior model's)" },
          },
        },
        {
          data: { values: [{ all: 100 }] },
          mark: { type: "rule", color: MUTED, strokeDash: [6, 3], strokeWidth: 2 },
          encoding: { x: { ...x, field: "all" } },
        },
        {
          mark: { type: "text", align: "left", baseline: "bottom", dy: -11 },
          encoding: { y: band, x: { ...x, datum: 0 }, text: { field: "title" } },
        },
        {
          mark: { type: "text", align: "right", baseline: "bottom", dy: -11, dx: -6 },
          encoding: { y: band, x: { ...x, datum: 100 }, text: { field: "value" } },
        },
      ],
    },
    {
      key: "residual-error",
      label: `Error on held-out runs, fitted of prior. ${rows.map(({ title, value }) => `${title}: ${value}`).join("; ")}.`,
    },
    { height: 46 * rows.length, hasVerticalAxis: false },
  );
  return figure({
    title: "Error on held-out runs, fitted against prior",
    picture,
    legend: legend([{ swatch: lineSwatch(MUTED, [6, 3]), text: "prior model, 100 %" }]),
    shows:
      "Root mean square of the leftover over windows, on runs kept from the fit. Each bar is against the prior model's own error.",
    showsNot: "How the error is spread: the bound above is about the worst window, not the mean.",
  });
}

async function curveFigure(curve: ResidualCurve, index: number): Promise<Markup> {
  const { title, unit, x: along, fitted, logged } = curve;
  const line = along.values.flatMap((x, i) => (Number.isFinite(fitted[i]) ? [{ x, y: fitted[i]! }] : []));
  const x = {
    field: "x",
    type: "quantitative",
    title: axisTitle(along.name, along.unit),
    scale: { nice: false, zero: false },
  };
  const y = { field: "y", type: "quantitative", title: axisTitle("term", unit) };
  const picture = await vegaChart(
    {
      layer: [
        {
          data: { values: [{ y: 0 }] },
          mark: { type: "rule", color: MUTED, strokeDash: [6, 3], strokeWidth: 2 },
          encoding: { y },
        },
        {
          data: { values: logged },
          mark: { type: "point", filled: true, color: SECOND, size: 28, opacity: 0.6 },
          encoding: { x, y },
        },
        { data: { values: line }, mark: { type: "line", color: FIRST, strokeWidth: 2.5 }, encoding: { x, y } },
      ],
    },
    {
      key: `residual-${index}`,
      label: `Fitted term, ${title}, along ${along.name}, ${spanOf(fitted, unit)}; the prior's is zero. ${logged.length} means of logged windows are drawn.`,
    },
  );
  return figure({
    title: `Fitted term: ${title}`,
    picture,
    legend: legend([
      { swatch: lineSwatch(FIRST, []), text: "fitted" },
      { swatch: lineSwatch(MUTED, [6, 3]), text: "prior: zero" },
      ...(logged.length === 0 ? [] : [{ swatch: dotSwatch(SECOND), text: "means of logged windows near this line" }]),
    ]),
    shows: `The term along ${along.name}, all other states at the middle of the envelope.${logged.length === 0 ? " No logged window lies near this line." : ""}`,
    showsNot: "The term elsewhere, nor whether the logs hold states there; see the coverage.",
  });
}

function spanOf(values: readonly number[], unit: string): string {
  const known = values.filter(Number.isFinite);
  if (known.length === 0) return "without any value";
  return `from ${number(Math.min(...known))} to ${quantity(Math.max(...known), unit)}`;
}
