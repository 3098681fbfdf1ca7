/** What a smaller margin costs: margin against authority as the tube's rate grows, and both against the rate. */
import type { CertificateSummary, Pictures, Summary } from "./artifacts.js";
import { askedMargin, largestAuthority } from "./certificateWords.js";
import { certificateLegend, figure, figures, legend } from "./figure.js";
import { quantity, share } from "./format.js";
import { type Markup, markup } from "./markup.js";
import { certificateStyle, LIMIT } from "./theme.js";
import { axisTitle, type ChartSpec, vegaChart } from "./vegaChart.js";

interface Row {
  readonly certificate: number;
  readonly rate: number;
  readonly margin: number;
  /** Per cent of the half-range. */
  readonly authority: number;
}

/** Axes end at this many chosen margins and authority limits: the curves run to infinity at both ends. */
const MARGINS_SHOWN = 2.5;
const LIMITS_SHOWN = 2;

export async function tradeOff(summary: Summary, pictures: Pictures): Promise<Markup> {
  const drawn = summary.certificates.flatMap((certificate) => {
    const curve = pictures.certificates.find(({ name }) => name === certificate.name);
    const isSound = certificate.status === "holds" || certificate.status === "authorityExceeded";
    return !isSound || curve === undefined || curve.tradeOff.length === 0 ? [] : [{ certificate, curve }];
  });
  if (drawn.length === 0)
    return markup`<p class="note">No certificate has a contraction rate above zero, so there is no trade-off to draw.</p>`;
  const limit = 100 * Math.max(...drawn.map(({ curve }) => curve.authorityLimit));
  const rows = drawn.flatMap(({ curve }, certificate) =>
    curve.tradeOff
      .filter(({ rate, margin, authority }) => [rate, margin, authority].every(Number.isFinite))
      .map(({ rate, margin, authority }): Row => ({ certificate, rate, margin, authority: 100 * authority })),
  );
  const chosen = drawn.flatMap(({ certificate }, i): Row[] => {
    const margin = askedMargin(summary, certificate);
    const authority = largestAuthority(certificate);
    if (margin === null || authority === null || certificate.rate === null) return [];
    return [{ certificate: i, rate: certificate.rate, margin, authority: 100 * authority }];
  });
  const frame = {
    margin: endOf(chosen.length > 0 ? MARGINS_SHOWN * largest(chosen) : 1.05 * largest(rows)),
    authority: Math.max(LIMITS_SHOWN * limit, 1.1 * Math.max(0, ...chosen.map(({ authority }) => authority))),
    rate: 1.05 * Math.max(1e-9, ...rows.map(({ rate }) => rate), ...chosen.map(({ rate }) => rate)),
  };
  const certificates = drawn.map(({ certificate }) => certificate);
  const titles = {
    margin: axisTitle(`margin '${summary.goal.name}'`, summary.goal.unit),
    authority: "authority (% of the inputs' half-range)",
    rate: "contraction rate of the tube (1/s)",
  };
  const draw = (x: Axis, y: Axis, key: string, label: string): Promise<Markup> =>
    vegaChart(specification({ rows, chosen, certificates, frame, titles, limit }, x, y), { key, label });
  const choices = chosen.map(
    (point) =>
      `${certificates[point.certificate]!.title} chosen at ${quantity(point.rate, "1/s")} with a margin of ${quantity(point.margin, summary.goal.unit, "up")} and an authority of ${share(point.authority / 100, "up")}`,
  );
  const told = `${choices.length === 0 ? "No point is chosen" : choices.join("; ")}. Authority limit ${share(limit / 100)}.`;
  const key = markup`${certificateLegend(certificates, (i) => certificates[i]!.title)}${legend([
    {
      swatch: markup`<path d="M1 7H33" stroke="${LIMIT}" stroke-width="2" stroke-dasharray="6 3"/>`,
      text: `authority limit, ${share(limit / 100)}`,
    },
  ])}`;
  const [exchange, margins, authorities] = await Promise.all([
    draw("authority", "margin", "trade-off", `Margin against authority. ${told}`),
    draw("rate", "margin", "margin-rate", `Margin against the rate of the tube. ${told}`),
    draw("rate", "authority", "authority-rate", `Authority against the rate of the tube. ${told}`),
  ]);
  const axes =
    chosen.length === 0
      ? "No point is chosen."
      : `The large point is the chosen rate. Axes end at ${MARGINS_SHOWN} times the largest chosen margin and ${LIMITS_SHOWN} times the limit.`;
  return figures([
    figure({
      title: `Margin '${summary.goal.name}' against authority`,
      picture: exchange,
      legend: key,
      shows: `Each curve follows one certificate from slow to fast tubes. ${axes}`,
      showsNot: "Authority that the plan itself uses: plans must leave this share of the inputs free.",
    }),
    figure({
      title: "Margin over the rate of the tube",
      picture: margins,
      legend: certificateLegend(certificates, (i) => certificates[i]!.title),
      shows: "A faster tube is thinner. A curve ends at the rate that the certificate can support.",
      showsNot: "Whether the actuators can follow such a rate; that is the next picture.",
    }),
    figure({
      title: "Authority over the rate of the tube",
      picture: authorities,
      legend: key,
      shows: "Authority grows without end as the rate nears the certificate's worst rate.",
      showsNot: "Sampling and lag, which limit the rate in practice.",
    }),
  ]);
}

type Axis = "rate" | "margin" | "authority";

interface Content {
  readonly rows: readonly Row[];
  readonly chosen: readonly Row[];
  readonly certificates: readonly CertificateSummary[];
  readonly frame: Readonly<Record<Axis, number>>;
  readonly titles: Readonly<Record<Axis, string>>;
  /** Per cent. */
  readonly limit: number;
}

function specification({ rows, chosen, certificates, frame, titles, limit }: Content, x: Axis, y: Axis): ChartSpec {
  const position = {
    x: { field: x, type: "quantitative", title: titles[x], scale: { domain: [0, frame[x]], nice: false } },
    y: { field: y, type: "quantitative", title: titles[y], scale: { domain: [0, frame[y]], nice: false } },
  };
  const curves = certificates.map(({ name }, i) => {
    const { color, dash } = certificateStyle(name);
    return {
      data: { values: rows.filter(({ certificate }) => certificate === i) },
      mark: { type: "line", clip: true, color, strokeDash: dash, strokeWidth: 2 },
      encoding: { ...position, order: { field: "rate", type: "quantitative" } },
    };
  });
  const points = chosen.map((point) => {
    const { color, shape } = certificateStyle(certificates[point.certificate]!.name);
    return {
      data: { values: [point] },
      mark: { type: "point", filled: true, color, shape, size: 130, opacity: 1, stroke: "var(--panel)" },
      encoding: position,
    };
  });
  const limits = [x, y].includes("authority")
    ? [
        {
          data: { values: [{ limit }] },
          mark: { type: "rule", color: LIMIT, strokeDash: [6, 3], strokeWidth: 2 },
          encoding: { [x === "authority" ? "x" : "y"]: { field: "limit", type: "quantitative" } },
        },
      ]
    : [];
  return { layer: [...curves, ...limits, ...points] };
}

function largest(rows: readonly Row[]): number {
  return Math.max(0, ...rows.map(({ margin }) => margin));
}

/** An axis needs some length. */
function endOf(value: number): number {
  return value > 0 ? value : 1;
}
