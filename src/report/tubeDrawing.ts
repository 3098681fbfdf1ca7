/**
 * Margins drawn to scale. With a planar rotation: an invented S-shaped path with every tube around it, and the largest
 * extent of the body-frame position error as an ellipse {p : p^T F^-1 p <= 1}, F = footprint = [xx, xy, yy], drawn as the
 * Cholesky factor of F times the unit circle. Else: the planned value of the asked state with a bar on both sides.
 */
import type { CertificateSummary, Pictures, Summary } from "./artifacts.js";
import { askedMargin, holding } from "./certificateWords.js";
import { positionUnit } from "./comparisonTable.js";
import { certificateLegend, figure, legend } from "./figure.js";
import { niceStep, number, quantity } from "./format.js";
import { type Markup, markup } from "./markup.js";
import { type Point, pixel, polyline } from "./svgPath.js";
import { CHART_WIDTH, certificateStyle } from "./theme.js";

const PATH_POINTS = 121;
/** The path is at least this many of the widest half-width long, so that no tube folds over itself. */
const PATH_IN_MARGINS = 10;
const PAD = 12;

interface Tube {
  readonly certificate: CertificateSummary;
  /** Half-width around the path in the drawing's unit. */
  readonly half: number;
}

export function tubeDrawing(summary: Summary, pictures: Pictures): Markup {
  const certificates = holding(summary);
  if (certificates.length === 0) return markup`<p class="note">No certificate holds, so there is no tube to draw.</p>`;
  return certificates.some(({ margins }) => margins.across !== undefined)
    ? pathDrawing(summary, pictures, certificates)
    : axisDrawing(summary, certificates);
}

/** The asked direction around the path where it is one of the plane's, else the worst direction of the plane. */
function planarKey(summary: Summary): "across" | "planar" {
  return summary.goal.name === "across" || summary.goal.name === "along" ? "across" : "planar";
}

function pathDrawing(summary: Summary, pictures: Pictures, certificates: readonly CertificateSummary[]): Markup {
  const key = planarKey(summary);
  const unit = positionUnit(summary, certificates[0]!);
  const tubes = widestFirst(
    certificates.flatMap((certificate) => {
      const half = certificate.margins[key];
      return half === undefined ? [] : [{ certificate, half }];
    }),
  );
  const widest = tubes[0]?.half ?? 0;
  const length = widest > 0 ? niceStep(PATH_IN_MARGINS * widest) : 1;
  const amplitude = length / 12;
  // the ends of a band lean over the ends of the path
  const overhang = widest * Math.sin(Math.atan((2 * Math.PI * amplitude) / length));
  const scale = (CHART_WIDTH - 2 * PAD) / (length + 2 * overhang);
  const height = 2 * (amplitude + widest) * scale + 2 * PAD;
  const path = sCurve(length, amplitude);
  const place = ([x, y]: Point): Point => [PAD + (overhang + x) * scale, height / 2 - y * scale];

  const bands = tubes.map(({ certificate, half }) => {
    const { color, dash } = certificateStyle(certificate.name);
    const outline = [...offset(path, half), ...offset(path, -half).reverse()];
    return markup`<path d="${polyline(outline.map(place))}Z" fill="${color}" fill-opacity="0.16" stroke="${color}" stroke-width="1.5" stroke-dasharray="${dash.join(" ")}"/>`;
  });
  // one ellipse a certificate, spread along the path so that they stay apart
  const ellipses = tubes.flatMap(({ certificate }, i) => {
    const footprint = pictures.certificates.find(({ name }) => name === certificate.name)?.footprint ?? null;
    if (footprint === null) return [];
    const at = path[Math.round(((i + 1) * (PATH_POINTS - 1)) / (tubes.length + 1))]!;
    const points = ellipse(footprint, at.heading).map(([x, y]): Point => place([at.x + x, at.y + y]));
    const [cx, cy] = place([at.x, at.y]);
    const { color } = certificateStyle(certificate.name);
    return [
      markup`<path d="${polyline(points)}Z" fill="${color}" fill-opacity="0.35" stroke="${color}" stroke-width="1"/><circle cx="${pixel(cx)}" cy="${pixel(cy)}" r="1.6" fill="var(--ink)"/>`,
    ];
  });
  const bar = niceStep(length / 8);
  const [barEnd, barY] = [CHART_WIDTH - PAD, height + 8];
  const barStart = barEnd - bar * scale;
  const picture = markup`<svg xmlns="http://www.w3.org/2000/svg" class="chart" role="img" aria-label="${`Tubes drawn to scale around an invented S-shaped path ${quantity(length, unit)} long. Half-widths: ${tubes.map(({ certificate, half }) => `${certificate.title} ${quantity(half, unit, "up")}`).join("; ")}.`}" viewBox="0 0 ${CHART_WIDTH} ${pixel(height + 22)}">
${bands}
<path d="${polyline(path.map(({ x, y }) => place([x, y])))}" fill="none" stroke="var(--ink)" stroke-width="1"/>
${ellipses}
<path d="M${pixel(barStart)} ${pixel(barY - 4)}v8m0 -4H${pixel(barEnd)}m0 -4v8" fill="none" stroke="var(--ink)" stroke-width="1.5"/>
<text x="${pixel(barStart - 8)}" y="${pixel(barY + 4.5)}" font-size="13" text-anchor="end" fill="var(--ink)">${quantity(bar, unit)}</text>
</svg>`;
  const hasEllipse = ellipses.length > 0;
  return figure({
    title: `Tubes to scale around an invented path, ${quantity(length, unit)} long`,
    picture,
    legend: markup`${certificateLegend(
      tubes.map(({ certificate }) => certificate),
      (i) => `${tubes[i]!.certificate.title}: ±\u00a0${quantity(tubes[i]!.half, unit, "up")}`,
    )}${legend([{ swatch: markup`<path d="M1 7H33" stroke="var(--ink)"/>`, text: "planned path" }])}`,
    shows: `Path, tubes and scale bar share one scale. The half-width of a band is the certificate's margin '${key}'.${hasEllipse ? " An ellipse is the largest position error seen from the body, all states taken together." : ""}`,
    showsNot:
      "A real path: this one is invented, and drawn with the vehicle pointing along it. The vehicle's own outline comes on top of the margin.",
    isAlone: true,
  });
}

function axisDrawing(summary: Summary, certificates: readonly CertificateSummary[]): Markup {
  const { goal } = summary;
  const tubes = widestFirst(
    certificates.map((certificate) => ({ certificate, half: askedMargin(summary, certificate) ?? 0 })),
  );
  const widest = tubes[0]!.half;
  const reach = widest > 0 ? niceStep(1.15 * widest) : 1;
  const middle = CHART_WIDTH / 2;
  const scale = (middle - 3 * PAD) / reach;
  const rowHeight = 40;
  const base = rowHeight * tubes.length + 14;
  const rows = tubes.map(({ certificate, half }, i) => {
    const { color, dash } = certificateStyle(certificate.name);
    const top = rowHeight * i + 22;
    const [left, right] = [middle - half * scale, middle + half * scale];
    return markup`<text x="${PAD}" y="${top - 7}" font-size="13" fill="var(--ink)">${certificate.title}: ±\u00a0${quantity(half, goal.unit, "up")}</text>
<path d="M${pixel(left)} ${top}H${pixel(right)}v12H${pixel(left)}Z" fill="${color}" fill-opacity="0.3" stroke="${color}" stroke-width="1.5" stroke-dasharray="${dash.join(" ")}"/><path d="M${middle} ${top - 3}v18" stroke="var(--ink)"/>`;
  });
  const ticks = [-1, -0.5, 0, 0.5, 1].map((part) => {
    const x = pixel(middle + part * reach * scale);
    const text = part === 0 ? "plan" : `${part > 0 ? "+" : "−"}${number(Math.abs(part * reach))}`;
    return markup`<path d="M${x} ${base}v6" stroke="var(--ink)"/><text x="${x}" y="${base + 20}" font-size="12.5" text-anchor="middle" fill="var(--ink)">${text}</text>`;
  });
  const picture = markup`<svg xmlns="http://www.w3.org/2000/svg" class="chart" role="img" aria-label="${`Margins drawn to scale on both sides of the planned ${goal.name}. ${tubes.map(({ certificate, half }) => `${certificate.title}: plus or minus ${quantity(half, goal.unit, "up")}`).join("; ")}.`}" viewBox="0 0 ${CHART_WIDTH} ${base + 46}">
${rows}
<path d="M${pixel(middle - reach * scale)} ${base}H${pixel(middle + reach * scale)}" stroke="var(--ink)"/>
${ticks}
<text x="${middle}" y="${base + 40}" font-size="13" text-anchor="middle" fill="var(--ink)">distance from the planned ${goal.name} (${goal.unit})</text>
</svg>`;
  return figure({
    title: `Margins to scale around a planned ${goal.name}`,
    picture,
    shows: `How far ${goal.name} can be from its plan, on both sides, all on one scale in ${goal.unit}.`,
    showsNot: "The machine's own outline and the other states; those margins are in the table.",
    isAlone: true,
  });
}

function widestFirst(tubes: Tube[]): Tube[] {
  return tubes.sort((a, b) => b.half - a.half);
}

interface PathPoint {
  readonly x: number;
  readonly y: number;
  readonly heading: number;
}

/** One period of a sine over the length; radius of curvature at least 0.3 of the length for an amplitude of 1/12. */
function sCurve(length: number, amplitude: number): PathPoint[] {
  return Array.from({ length: PATH_POINTS }, (_, i) => {
    const phase = (2 * Math.PI * i) / (PATH_POINTS - 1);
    const slope = ((2 * Math.PI * amplitude) / length) * Math.cos(phase);
    return { x: (length * i) / (PATH_POINTS - 1), y: amplitude * Math.sin(phase), heading: Math.atan(slope) };
  });
}

/** The path moved to its left by a distance. */
function offset(path: readonly PathPoint[], distance: number): Point[] {
  return path.map(({ x, y, heading }) => [x - distance * Math.sin(heading), y + distance * Math.cos(heading)]);
}

function ellipse([xx, xy, yy]: readonly [number, number, number], heading: number): Point[] {
  const l11 = Math.sqrt(Math.max(xx, 0));
  const l21 = l11 === 0 ? 0 : xy / l11;
  const l22 = Math.sqrt(Math.max(yy - l21 * l21, 0));
  const [cos, sin] = [Math.cos(heading), Math.sin(heading)];
  return Array.from({ length: 48 }, (_, i) => {
    const [c, s] = [Math.cos((Math.PI * i) / 24), Math.sin((Math.PI * i) / 24)];
    const along = l11 * c;
    const across = l21 * c + l22 * s;
    return [cos * along - sin * across, sin * along + cos * across];
  });
}
