/**
 * The plan with its tube to scale. In the plane: the band that the discs of the margin 'planar' sweep along the plan. Else: the planned value of the asked state over time with its margin.
 */
import { boxSwatch, figure, type LegendItem, legend, lineSwatch } from "./figure.js";
import { niceStep, quantity } from "./format.js";
import { type Markup, markup } from "./markup.js";
import type { PlanPicture, PlanSummary } from "./planArtifacts.js";
import { type Point, pixel, polyline } from "./svgPath.js";
import { CHART_WIDTH, FIRST, SECOND } from "./theme.js";
import { axisTitle, vegaChart } from "./vegaChart.js";

const PAD = 14;
const TALLEST = 520;
/** Fewer vertices than samples: a band changes little from one to the next. */
const MOST_PARTS = 400;

export async function planDrawing(summary: PlanSummary, picture: PlanPicture): Promise<Markup> {
  return picture.path === null ? await valueDrawing(summary, picture) : pathDrawing(summary, picture, picture.path);
}

interface Part {
  readonly from: Point;
  readonly to: Point;
  readonly half: number;
}

function pathDrawing(summary: PlanSummary, { rows }: PlanPicture, path: NonNullable<PlanPicture["path"]>): Markup {
  const at = summary.margins.findIndex(({ name }) => name === "planar");
  const { fixed } = summary.margins[at]!;
  const { points, unit } = path;
  // every row has this margin: it covers any heading
  const halves = rows.map(({ margins }) => margins[at]!);
  const parts = partsOf(
    points.map(({ x, y }): Point => [x, y]),
    halves,
  );
  const reach = Math.max(fixed ?? 0, ...halves);
  const [left, right] = [Math.min(...points.map(({ x }) => x)) - reach, Math.max(...points.map(({ x }) => x)) + reach];
  const [low, high] = [Math.min(...points.map(({ y }) => y)) - reach, Math.max(...points.map(({ y }) => y)) + reach];
  const scale = Math.min((CHART_WIDTH - 2 * PAD) / (right - left), TALLEST / (high - low));
  const height = (high - low) * scale + 2 * PAD;
  const place = ([x, y]: Point): Point => [PAD + (x - left) * scale, PAD + (high - y) * scale];
  const band = (half: (part: Part) => number): Markup =>
    polygons(
      parts.map(({ from, to, ...rest }) => capsule(place(from), place(to), scale * half({ from, to, ...rest }))),
    );
  const bar = niceStep((right - left) / 8);
  const barEnd = CHART_WIDTH - PAD;
  const barStart = barEnd - bar * scale;
  const barY = height + 8;
  const widest = quantity(Math.max(...halves), unit, "up");
  const drawing = markup`<svg xmlns="http://www.w3.org/2000/svg" class="chart" role="img" aria-label="${`The plan with its tube to scale. Half-width along the plan at most ${widest}${besideFixed(fixed, unit)}.`}" viewBox="0 0 ${CHART_WIDTH} ${pixel(height + 22)}">
${fixed === null ? null : markup`<g fill="${SECOND}" fill-opacity="0.3"><path d="${band(() => fixed)}"/></g>`}
<g fill="${FIRST}"><path d="${band(({ half }) => half)}"/></g>
<path d="${polyline(points.map(({ x, y }) => place([x, y])))}" fill="none" stroke="var(--panel)" stroke-width="1"/>
<path d="M${pixel(barStart)} ${pixel(barY - 4)}v8m0 -4H${pixel(barEnd)}m0 -4v8" fill="none" stroke="var(--ink)" stroke-width="1.5"/>
<text x="${pixel(barStart - 8)}" y="${pixel(barY + 4.5)}" font-size="13" text-anchor="end" fill="var(--ink)">${quantity(bar, unit)}</text>
</svg>`;
  return figure({
    title: "The plan and its tube, to scale",
    picture: drawing,
    legend: legend([
      { swatch: boxSwatch(FIRST), text: `tube along the plan, at most ±\u00a0${widest}` },
      ...fixedItem(fixed, unit),
    ]),
    shows:
      "Plan, tubes and scale bar share one scale. Half-widths are the margin 'planar': around every planned position a disc, swept along the plan.",
    showsNot: "The vehicle's own outline, which comes on top, nor how far it can turn from the planned heading.",
    isAlone: true,
  });
}

/** Stretches of the path between kept samples, each with the largest margin of its rows. */
function partsOf(points: readonly Point[], halves: readonly number[]): Part[] {
  const stride = Math.max(1, Math.ceil(halves.length / MOST_PARTS));
  const parts: Part[] = [];
  for (let k = 0; k < halves.length; k += stride) {
    const end = Math.min(k + stride, halves.length);
    parts.push({ from: points[k]!, to: points[end]!, half: Math.max(...halves.slice(k, end)) });
  }
  return parts;
}

/** Outline of all discs between two points. */
function capsule([ax, ay]: Point, [bx, by]: Point, half: number): Point[] {
  const heading = Math.atan2(by - ay, bx - ax);
  const arc = (cx: number, cy: number, from: number): Point[] =>
    Array.from({ length: 9 }, (_, i) => {
      const angle = from + (Math.PI * i) / 8;
      return [cx + half * Math.cos(angle), cy + half * Math.sin(angle)];
    });
  return [...arc(bx, by, heading - Math.PI / 2), ...arc(ax, ay, heading + Math.PI / 2)];
}

/** One path of many closed outlines, all turning the same way, so that overlaps fill once. */
function polygons(outlines: readonly (readonly Point[])[]): Markup {
  return markup`${outlines.map((outline) => markup`${polyline(outline)}Z`)}`;
}

async function valueDrawing(summary: PlanSummary, { rows, planned }: PlanPicture): Promise<Markup> {
  const at = summary.margins.findIndex(({ name }) => name === summary.goal);
  const { name, unit, fixed } = summary.margins[at]!;
  const values = planned ?? [];
  const halves = rows.map(({ margins }) => margins[at]!);
  const band = (half: (k: number) => number) =>
    rows.flatMap(({ time, until }, k) =>
      [
        [time, values[k]!],
        [until, values[k + 1]!],
      ].map(([t, value]) => ({ time: t, low: value! - half(k), high: value! + half(k) })),
    );
  const x = {
    field: "time",
    type: "quantitative",
    title: "time of the plan (s)",
    scale: { domain: [rows[0]!.time, summary.plan.until], nice: false },
  };
  const y = (field: string) => ({
    field,
    type: "quantitative",
    title: axisTitle(name, unit),
    scale: { zero: false, nice: false },
  });
  const area = (half: (k: number) => number, color: string, opacity: number) => ({
    data: { values: band(half) },
    mark: { type: "area", color, opacity },
    encoding: { x, y: y("low"), y2: { field: "high" } },
  });
  const line = [...rows.map(({ time }) => time), rows.at(-1)!.until].map((time, k) => ({ time, value: values[k]! }));
  const picture = await vegaChart(
    {
      layer: [
        ...(fixed === null ? [] : [area(() => fixed, SECOND, 0.3)]),
        area((k) => halves[k]!, FIRST, 1),
        {
          data: { values: line },
          mark: { type: "line", color: "var(--panel)", strokeWidth: 1 },
          encoding: { x, y: y("value") },
        },
      ],
    },
    {
      key: "plan-band",
      label: `Planned ${name} over time with its margin, at most ${quantity(Math.max(...halves), unit, "up")} on both sides${besideFixed(fixed, unit)}.`,
    },
  );
  return figure({
    title: `The planned ${name} and its tube`,
    picture,
    legend: legend([
      { swatch: boxSwatch(FIRST), text: "tube along the plan" },
      ...fixedItem(fixed, unit),
      { swatch: lineSwatch("var(--muted)", []), text: "plan, in the middle" },
    ]),
    shows: `How far ${name} can be from its plan at any time, on both sides, in ${unit}.`,
    showsNot: "The other states, whose margins are in the table, nor the machine's own outline.",
    isAlone: true,
  });
}

function besideFixed(fixed: number | null, unit: string): string {
  return fixed === null ? "" : `; the fixed tube's is ${quantity(fixed, unit, "up")}`;
}

function fixedItem(fixed: number | null, unit: string): LegendItem[] {
  return fixed === null
    ? []
    : [{ swatch: boxSwatch(SECOND), text: `fixed tube, ±\u00a0${quantity(fixed, unit, "up")}` }];
}
