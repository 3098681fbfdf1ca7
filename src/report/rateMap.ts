/** Where a certificate contracts and where it does not: the pointwise rate over the two coordinates that matter most. */
import type { CertificatePicture, CertificateSummary, Pictures, Summary } from "./artifacts.js";
import { boxSwatch, crossSwatch, figure, figures, legend, lineSwatch } from "./figure.js";
import { niceStep, number, plural, quantity, range } from "./format.js";
import { type Markup, markup } from "./markup.js";
import { certificateStyle, FAILING_COLOR, INK, LIMIT, RATE_COLORS, UNKNOWN_COLOR } from "./theme.js";
import { axisTitle, vegaChart } from "./vegaChart.js";

type RateMap = NonNullable<CertificatePicture["rateMap"]>;
type Violations = CertificatePicture["violations"];

/** Worst violations drawn in one map; the text says when there are more. */
const VIOLATIONS_DRAWN = 300;

export async function rateMaps(summary: Summary, pictures: Pictures): Promise<Markup> {
  const drawn = summary.certificates.flatMap((certificate, index) => {
    const picture = pictures.certificates.find(({ name }) => name === certificate.name);
    return picture?.rateMap ? [{ certificate, index, map: picture.rateMap, violations: picture.violations }] : [];
  });
  if (drawn.length === 0)
    return markup`<p class="note">No rate map was saved: the condition depends on no coordinate, or no metric was found.</p>`;
  const bands = bandsOf(drawn.filter(({ map }) => map.y !== null).flatMap(({ map }) => map.rate.flat()));
  return figures(
    await Promise.all(
      drawn.map(({ certificate, index, map, violations }) =>
        map.y === null
          ? rateLine(certificate, index, map, violations)
          : rateArea(certificate, index, { x: map.x, y: map.y, rate: map.rate }, violations, bands),
      ),
    ),
  );
}

interface Bands {
  /** Lower ends, 1/s; the first band above it starts at 0 or more. */
  readonly start: number;
  readonly step: number;
  readonly count: number;
}

/** At most eight bands of one nice width over the rates that are not negative; shared by all maps. */
function bandsOf(rates: readonly number[]): Bands {
  const sound = rates.filter((rate) => Number.isFinite(rate) && rate >= 0);
  if (sound.length === 0) return { start: 0, step: 1, count: 0 };
  const low = sound.reduce((a, b) => Math.min(a, b));
  const high = sound.reduce((a, b) => Math.max(a, b));
  const step = niceStep(Math.max((high - low) / (RATE_COLORS.length - 2), 0.005 * high, 1e-9));
  const first = Math.floor(low / step);
  return { start: first * step, step, count: Math.floor(high / step) - first + 1 };
}

const FAILING = -1;
const UNKNOWN = -2;

function bandOf(rate: number | null, { start, step, count }: Bands): number {
  if (rate === null || !Number.isFinite(rate)) return UNKNOWN;
  return rate < 0 ? FAILING : Math.max(0, Math.min(Math.floor((rate - start) / step + 1e-9), count - 1));
}

function bandColor(band: number, { count }: Bands): string {
  if (band === UNKNOWN) return UNKNOWN_COLOR;
  if (band === FAILING) return FAILING_COLOR;
  return RATE_COLORS[count <= 1 ? 4 : Math.round((band * (RATE_COLORS.length - 1)) / (count - 1))]!;
}

interface PlaneMap {
  readonly x: RateMap["x"];
  readonly y: RateMap["x"];
  readonly rate: RateMap["rate"];
}

async function rateArea(
  certificate: CertificateSummary,
  index: number,
  map: PlaneMap,
  violations: Violations,
  bands: Bands,
): Promise<Markup> {
  const xs = cellEdges(map.x.values);
  const ys = cellEdges(map.y.values);
  const cells = map.rate.flatMap((row, j) =>
    mergedRow(row, bands).map((run) => ({
      x: xs[run.from]!,
      x2: reachInto(xs, run.to),
      y: ys[j]!,
      y2: reachInto(ys, j + 1),
      color: bandColor(run.band, bands),
      band: run.band,
    })),
  );
  const failing = map.rate.flatMap((row, j) =>
    row.flatMap((rate, i) => (bandOf(rate, bands) === FAILING ? [{ x: map.x.values[i]!, y: map.y.values[j]! }] : [])),
  );
  const axis = (of: RateMap["x"], edges: readonly number[]) => ({
    type: "quantitative",
    title: axisTitle(of.name, of.unit),
    scale: { domain: [edges[0]!, edges.at(-1)!], nice: false, zero: false },
    axis: { grid: false },
  });
  const x = { field: "x", ...axis(map.x, xs) };
  const y = { field: "y", ...axis(map.y, ys) };
  const crosses = worst(violations).filter((violation) => violation.y !== null);
  const mark = (color: string, strokeWidth: number) => ({
    data: { values: crosses },
    mark: { type: "point", shape: CROSS, size: 90, stroke: color, strokeWidth, opacity: 1 },
    encoding: { x, y },
  });
  const picture = await vegaChart(
    {
      layer: [
        {
          data: { values: cells },
          mark: { type: "rect", clip: true },
          encoding: {
            x,
            y,
            x2: { field: "x2" },
            y2: { field: "y2" },
            fill: { field: "color", type: "nominal", scale: null },
          },
        },
        {
          data: { values: failing },
          mark: { type: "point", shape: CROSS, size: 12, stroke: "#f6e9e4", strokeWidth: 0.8, opacity: 1, clip: true },
          encoding: { x, y },
        },
        ...(crosses.length === 0 ? [] : [mark("#ffffff", 4.5), mark("#111111", 2)]),
      ],
    },
    {
      key: `rate-map-${index}`,
      label: `Rate map of the ${certificate.title} over ${map.x.name} and ${map.y.name}. ${told(map.rate.flat(), violations)}`,
    },
    { height: 270, hasVerticalAxis: true },
  );
  const used = [...new Set(cells.map(({ band }) => band))].sort((a, b) => a - b);
  return figure({
    title: `Contraction rate: ${certificate.title}`,
    picture,
    legend: legend([
      ...used.map((band) => ({
        swatch:
          band === FAILING
            ? markup`${boxSwatch(FAILING_COLOR)}<path d="M14 4l6 6m0 -6l-6 6" stroke="#f6e9e4"/>`
            : boxSwatch(bandColor(band, bands)),
        text: bandText(band, bands),
      })),
      ...(crosses.length === 0
        ? []
        : [{ swatch: crossSwatch(INK), text: `violation found by search (${crosses.length} drawn)` }]),
    ]),
    ...captions(certificate, violations),
  });
}

async function rateLine(
  certificate: CertificateSummary,
  index: number,
  map: RateMap,
  violations: Violations,
): Promise<Markup> {
  const row = map.rate[0] ?? [];
  const values = map.x.values.flatMap((x, i) => (Number.isFinite(row[i]) ? [{ x, rate: row[i]! }] : []));
  const { color, dash } = certificateStyle(certificate.name);
  const crosses = worst(violations).map(({ x, rate }) => ({ x, rate }));
  const x = {
    field: "x",
    type: "quantitative",
    title: axisTitle(map.x.name, map.x.unit),
    scale: { nice: false, zero: false },
  };
  const y = { field: "rate", type: "quantitative", title: "rate (1/s)" };
  const picture = await vegaChart(
    {
      layer: [
        { data: { values: [{ rate: 0 }] }, mark: { type: "rule", color: LIMIT, strokeDash: [6, 3] }, encoding: { y } },
        { data: { values }, mark: { type: "line", color, strokeDash: dash, strokeWidth: 2 }, encoding: { x, y } },
        {
          data: { values: crosses },
          mark: { type: "point", shape: CROSS, size: 90, stroke: INK, strokeWidth: 2, opacity: 1 },
          encoding: { x, y },
        },
      ],
    },
    {
      key: `rate-map-${index}`,
      label: `Rate of the ${certificate.title} along ${map.x.name}. ${told(row, violations)}`,
    },
  );
  return figure({
    title: `Contraction rate: ${certificate.title}`,
    picture,
    legend: legend([
      { swatch: lineSwatch(color, dash), text: `worst rate along ${map.x.name}` },
      { swatch: lineSwatch(LIMIT, [6, 3]), text: "no contraction at or below this line" },
      ...(crosses.length === 0 ? [] : [{ swatch: crossSwatch(INK), text: "violation found by search" }]),
    ]),
    ...captions(certificate, violations),
  });
}

const CROSS = "M-0.7,-0.7L0.7,0.7M0.7,-0.7L-0.7,0.7";

function captions({ status }: CertificateSummary, violations: Violations): { shows: string; showsNot: string } {
  const found =
    violations.length === 0
      ? "The search found no violation."
      : `The search found ${plural(violations.length, "violation")}${violations.length > VIOLATIONS_DRAWN ? `; the worst ${VIOLATIONS_DRAWN} are drawn` : ""}.`;
  return {
    shows: `The slowest rate over the coordinates that are not drawn, on a coarse grid. ${found}`,
    showsNot: `Anything between the grid's points: it is a picture, not evidence.${status === "holds" ? "" : " No margin follows from the part that looks sound."}`,
  };
}

function told(rates: readonly (number | null)[], violations: Violations): string {
  const known = rates.filter((rate): rate is number => rate !== null && Number.isFinite(rate));
  const span =
    known.length === 0
      ? "No rate could be computed."
      : `Rates from ${number(
          known.reduce((a, b) => Math.min(a, b)),
          "down",
        )} to ${quantity(
          known.reduce((a, b) => Math.max(a, b)),
          "1/s",
        )}.`;
  return `${span} ${violations.length === 0 ? "No violation was found." : `${plural(violations.length, "violation")} found.`}`;
}

function worst(violations: Violations): Violations {
  return [...violations].sort((a, b) => a.rate - b.rate).slice(0, VIOLATIONS_DRAWN);
}

function bandText(band: number, { start, step }: Bands): string {
  if (band === UNKNOWN) return "not computed";
  if (band === FAILING) return "below 0 1/s: does not contract";
  return range([start + band * step, start + (band + 1) * step], "1/s", ["near", "near"]);
}

/** Neighbours of one band in a row: cells from `from` up to, not with, `to`. */
function mergedRow(row: readonly (number | null)[], bands: Bands): { from: number; to: number; band: number }[] {
  const runs: { from: number; to: number; band: number }[] = [];
  row.forEach((rate, i) => {
    const band = bandOf(rate, bands);
    const last = runs.at(-1);
    if (last?.band === band) last.to = i + 1;
    else runs.push({ from: i, to: i + 1, band });
  });
  return runs;
}

/** A little beyond an edge: the next cell is drawn over it, so that no hairline shows between the two. */
function reachInto(edges: readonly number[], at: number): number {
  return edges[at]! + 0.3 * (edges[at]! - edges[at - 1]!);
}

/** Half-way between grid values; the outermost cells end at the outermost values. */
function cellEdges(values: readonly number[]): number[] {
  if (values.length < 2) return [(values[0] ?? 0) - 0.5, (values[0] ?? 0) + 0.5];
  return [values[0]!, ...values.slice(1).map((value, i) => (value + values[i]!) / 2), values.at(-1)!];
}
