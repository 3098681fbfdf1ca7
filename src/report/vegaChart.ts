/**
 * A Vega-Lite chart as inline SVG, drawn without a browser. Specifications use fixed field names and literal titles, so
 * that no text of a plant file is read as an expression.
 */
import { type LoggerInterface, parse, View } from "vega";
import { type Config, compile, type TopLevelSpec } from "vega-lite";
import { escapeText, Markup, withoutControls } from "./markup.js";
import { CHART_HEIGHT, CHART_WIDTH, FONT, INK, LINE, MUTED } from "./theme.js";

/** A unit, layer or concatenated specification without size, background and configuration, which come from here. */
export type ChartSpec = Readonly<Record<string, unknown>>;

export interface ChartText {
  /** Unique on the page: keeps the drawing's own names apart from those of other drawings. */
  readonly key: string;
  /** What a reader who does not see the chart is told. */
  readonly label: string;
}

const TEXT = { font: FONT, fontSize: 13 };
const AXIS: NonNullable<Config["axis"]> = {
  labelFont: FONT,
  titleFont: FONT,
  labelFontSize: 12.5,
  titleFontSize: 13,
  titleFontWeight: 500,
  labelColor: INK,
  titleColor: INK,
  domainColor: MUTED,
  tickColor: MUTED,
  gridColor: LINE,
  gridOpacity: 0.7,
  titleLimit: 0,
  labelLimit: 0,
  tickCount: 5,
  labelOverlap: true,
  labelFlush: false,
};
const CONFIG: Config = {
  aria: false,
  font: FONT,
  axis: AXIS,
  // horizontal titles above the axis: readable, and independent of how wide the labels are
  axisY: {
    titleAngle: 0,
    titleAlign: "left",
    titleAnchor: "start",
    titleX: -50,
    titleY: -12,
    minExtent: 44,
    maxExtent: 44,
  },
  text: { ...TEXT, color: INK },
  view: { stroke: "transparent" },
};
/**
 * Fixed room around the plot: without a browser the width of text is only guessed, and a chart fitted to guesses comes
 * out too small.
 */
const ROOM = { left: 56, right: 16, bottom: 44 };
const TOP = { withTitle: 28, bare: 8 };

export interface ChartShape {
  /** Of the plot itself, pixels. */
  readonly height: number;
  /** False for bars, whose vertical axis has no title and no labels. */
  readonly hasVerticalAxis: boolean;
}

const USUAL_SHAPE: ChartShape = { height: CHART_HEIGHT, hasVerticalAxis: true };

/** Warnings of the compiler are defects of a specification here; the drawing itself may meet odd data. */
const strict = logger((message) => {
  throw new Error(`chart specification: ${message}`);
});
const lenient = logger(() => undefined);

export async function vegaChart(
  spec: ChartSpec,
  text: ChartText,
  { height, hasVerticalAxis }: ChartShape = USUAL_SHAPE,
): Promise<Markup> {
  const left = hasVerticalAxis ? ROOM.left : ROOM.right;
  const whole = {
    width: CHART_WIDTH - left - ROOM.right,
    height,
    autosize: "none",
    padding: { ...ROOM, left, top: hasVerticalAxis ? TOP.withTitle : TOP.bare },
    background: null,
    ...spec,
  } as unknown as TopLevelSpec;
  const { spec: compiled } = compile(whole, { config: CONFIG, logger: strict });
  const view = new View(parse(compiled), { renderer: "none", logger: lenient });
  try {
    return new Markup(embedded(await view.toSVG(), text));
  } finally {
    view.finalize();
  }
}

/** The root element gets the label and a fluid size; names are made unique; what only scripts need goes. */
function embedded(svg: string, { key, label }: ChartText): string {
  const names = [...new Set([...svg.matchAll(/ id="([^"]+)"/g)].map((match) => match[1]!))];
  let text = withoutControls(svg)
    .replace(/ (?:class|role|pointer-events|aria-[a-z]+)="[^"]*"/g, "")
    .replace(/<path d="(?:M0,0h0v0h0Z)?"(?: display="none")?\/>/g, "");
  names.forEach((name, i) => {
    text = text.replaceAll(`id="${name}"`, `id="${key}-${i}"`).replaceAll(`url(#${name})`, `url(#${key}-${i})`);
  });
  return text.replace(
    /^<svg xmlns="[^"]*" xmlns:xlink="[^"]*" version="1.1"/,
    `<svg xmlns="http://www.w3.org/2000/svg" class="chart" role="img" aria-label="${escapeText(label)}"`,
  );
}

function logger(warn: (message: string) => void): LoggerInterface {
  const self: LoggerInterface = {
    level: (() => self) as LoggerInterface["level"],
    error: (...args: readonly unknown[]) => {
      throw new Error(`chart: ${args.join(" ")}`);
    },
    warn: (...args: readonly unknown[]) => {
      warn(args.join(" "));
      return self;
    },
    info: () => self,
    debug: () => self,
  };
  return self;
}

/** A logarithmic axis where positive values span more than this ratio. */
const LOG_RATIO = 30;

export type HistoryScale = { readonly type: "log" } | { readonly type: "linear"; readonly zero: false };

export function historyScale(values: readonly number[]): HistoryScale {
  const low = Math.min(...values);
  return low > 0 && Math.max(...values) / low > LOG_RATIO ? { type: "log" } : { type: "linear", zero: false };
}

/** Axis title: name and unit. */
export function axisTitle(name: string, unit: string): string {
  return unit === "1" ? name : `${name} (${unit})`;
}
