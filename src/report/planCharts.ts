/** Margin, push and rate, authority over the time of the plan, each beside the fixed tube's. */
import { figure, figures, legend, lineSwatch } from "./figure.js";
import { quantity, share } from "./format.js";
import type { Markup } from "./markup.js";
import type { PlanPicture, PlanSummary } from "./planArtifacts.js";
import { FIRST, LIMIT, SECOND } from "./theme.js";
import { axisTitle, vegaChart } from "./vegaChart.js";

const FIXED_DASH = [7, 3];
const LIMIT_DASH = [2, 3];

interface Curve {
  readonly key: string;
  readonly title: string;
  readonly axis: string;
  /** One value a row; null leaves a gap. */
  readonly values: readonly (number | null)[];
  /** Level lines. */
  readonly fixed: number | null;
  readonly limit: number | null;
  readonly write: (value: number) => string;
  readonly words: { readonly along: string; readonly fixed: string; readonly limit: string };
  readonly shows: string;
  readonly showsNot: string;
}

export async function planCharts(summary: PlanSummary, picture: PlanPicture): Promise<Markup> {
  const at = summary.margins.findIndex(({ name }) => name === summary.goal);
  const { name, unit, fixed } = summary.margins[at]!;
  const { rows } = picture;
  const usual = { along: "along the plan", fixed: "fixed tube", limit: "" };
  const perSecond = (value: number): string => quantity(value, "1/s");
  const curves: Curve[] = [
    {
      key: "plan-margin",
      title: `Margin '${name}' over time`,
      axis: axisTitle(`margin '${name}'`, unit),
      values: rows.map(({ margins }) => margins[at] ?? null),
      fixed,
      limit: null,
      write: (value) => quantity(value, unit, "up"),
      words: usual,
      shows:
        "The margin that holds from each sample of the plan to the next. It starts small where the tube starts small.",
      showsNot: "The margin of another plan, nor of this one under another law.",
    },
    {
      key: "plan-sigma",
      title: "Push of the disturbance over time",
      axis: "largest push on the distance (1/s)",
      values: rows.map(({ sigma }) => sigma),
      fixed: picture.fixedSigma,
      limit: null,
      write: perSecond,
      words: usual,
      shows:
        "The worst push over all states that the tube can touch at that time, each channel at its own worst state.",
      showsNot: "The plan's own jumps, which are added to the radius apart from it.",
    },
    {
      key: "plan-rate",
      title: "Contraction rate over time",
      axis: "rate (1/s)",
      values: rows.map(({ provedRate }) => (provedRate < Number.MAX_VALUE ? provedRate : null)),
      fixed: summary.rate,
      limit: null,
      write: perSecond,
      words: { along: "slowest rate proved around the plan", fixed: "rate of the law", limit: "" },
      shows: "How much faster than the law the metric could contract around the plan.",
      showsNot: "A rate that is used: the margins here are those of the law's one rate.",
    },
    {
      key: "plan-authority",
      title: "Authority over time",
      axis: "authority (% of the inputs' half-range)",
      values: rows.map(({ authority }) => 100 * authority),
      fixed: summary.authority.fixed === null ? null : 100 * summary.authority.fixed,
      limit: 100 * summary.authority.limit,
      write: (value) => share(value / 100, "up"),
      words: { ...usual, limit: "authority limit" },
      shows: "The share of the half-range that tracking may ask of any input at that time.",
      showsNot: "What the plan itself uses of the inputs; the two together stay within the range.",
    },
  ];
  return figures(await Promise.all(curves.map((curve) => curveFigure(curve, rows, summary.plan.until))));
}

async function curveFigure(curve: Curve, rows: PlanPicture["rows"], until: number): Promise<Markup> {
  const { values, fixed, limit, write, words } = curve;
  const known = values.filter((value) => value !== null);
  const points = rows.map(({ time }, k) => ({ time, value: values[k] ?? null }));
  const last = rows.at(-1)!;
  const top = 1.08 * Math.max(fixed ?? 0, limit ?? 0, ...known, Number.MIN_VALUE);
  const x = {
    field: "time",
    type: "quantitative",
    title: "time of the plan (s)",
    scale: { domain: [rows[0]!.time, until], nice: false },
  };
  const y = { type: "quantitative", title: curve.axis, scale: { domain: [0, top], nice: false } };
  const level = (value: number, color: string, strokeDash: readonly number[]) => ({
    data: { values: [{ value }] },
    mark: { type: "rule", color, strokeDash, strokeWidth: 2 },
    encoding: { y: { ...y, field: "value" } },
  });
  const picture = await vegaChart(
    {
      layer: [
        ...(fixed === null ? [] : [level(fixed, SECOND, FIXED_DASH)]),
        ...(limit === null ? [] : [level(limit, LIMIT, LIMIT_DASH)]),
        {
          data: { values: [...points, { time: last.until, value: values.at(-1) ?? null }] },
          mark: {
            type: "line",
            interpolate: "step-after",
            color: FIRST,
            strokeWidth: 2.5,
            invalid: "break-paths-show-domains",
          },
          encoding: { x, y: { ...y, field: "value" } },
        },
      ],
    },
    {
      key: curve.key,
      label: `${curve.title}. ${spanWords(known, write)}${fixed === null ? "" : `; ${words.fixed} ${write(fixed)}`}.`,
    },
  );
  return figure({
    title: curve.title,
    picture,
    legend: legend([
      { swatch: lineSwatch(FIRST, []), text: words.along },
      ...(fixed === null ? [] : [{ swatch: lineSwatch(SECOND, FIXED_DASH), text: `${words.fixed}, ${write(fixed)}` }]),
      ...(limit === null ? [] : [{ swatch: lineSwatch(LIMIT, LIMIT_DASH), text: `${words.limit}, ${write(limit)}` }]),
    ]),
    shows: curve.shows,
    showsNot: curve.showsNot,
  });
}

function spanWords(known: readonly number[], write: (value: number) => string): string {
  return known.length === 0
    ? "No value along the plan"
    : `Along the plan from ${write(Math.min(...known))} to ${write(Math.max(...known))}`;
}
