/** Colours, shapes and the page's style. Colours are CSS variables, so that light, dark and print differ in one place. */

export interface CertificateStyle {
  readonly color: string;
  /** Stroke dashes; empty: solid. */
  readonly dash: readonly number[];
  readonly shape: "circle" | "square" | "diamond" | "triangle-up" | "triangle-down";
}

const STYLES: Readonly<Record<string, CertificateStyle>> = {
  learned: { color: "var(--learned)", dash: [], shape: "circle" },
  constant: { color: "var(--constant)", dash: [7, 3], shape: "square" },
  riccati: { color: "var(--riccati)", dash: [2, 3], shape: "diamond" },
  "constant-prior": { color: "var(--constant-prior)", dash: [8, 3, 2, 3], shape: "triangle-up" },
  "riccati-prior": { color: "var(--riccati-prior)", dash: [1, 4], shape: "triangle-down" },
};
const OTHER: CertificateStyle = { color: "var(--muted)", dash: [4, 4], shape: "square" };

export function certificateStyle(name: string): CertificateStyle {
  return STYLES[name] ?? OTHER;
}

/** Of the rate map, slow to fast; lightness falls steadily, so that it reads without colour. */
export const RATE_COLORS = ["#f3ead3", "#dcd9b8", "#b5c9a8", "#86b39f", "#5a9a97", "#3b7d8c", "#2a5f7c", "#213f63"];
export const FAILING_COLOR = "#5b1f2a";
export const UNKNOWN_COLOR = "#9a9a9a";

export const INK = "var(--ink)";
export const MUTED = "var(--muted)";
export const LINE = "var(--line)";
export const LIMIT = "var(--limit)";
export const FIRST = "var(--learned)";
export const SECOND = "var(--constant)";

export const FONT = "system-ui, sans-serif";
export const CHART_WIDTH = 420;
export const CHART_HEIGHT = 200;

const LIGHT = `--paper: #fcfbf8; --panel: #ffffff; --ink: #1b2228; --muted: #59646d; --line: #d9d6cd;
  --learned: #17508f; --constant: #c2600a; --riccati: #66696e; --constant-prior: #d99a5b; --riccati-prior: #9b9ea3;
  --limit: #8c2138; --good: #0d6358; --bad: #8c2138;`;
const DARK = `--paper: #14181c; --panel: #1b2126; --ink: #e9e6df; --muted: #a4adb5; --line: #3a434b;
  --learned: #7fb5f5; --constant: #f5a25a; --riccati: #b9bec4; --constant-prior: #c98d55; --riccati-prior: #868c93;
  --limit: #f08aa0; --good: #5cc8b6; --bad: #f08aa0;`;

export const STYLE = `
:root { color-scheme: light; ${LIGHT} }
@media screen and (prefers-color-scheme: dark) { :root { color-scheme: dark; ${DARK} } }
* { box-sizing: border-box; }
body { margin: 0; background: var(--paper); color: var(--ink); font: 16px/1.5 ${FONT}; overflow-wrap: break-word; }
main, header, footer { max-width: 1120px; margin: 0 auto; padding: 0 20px; }
header { padding-top: 28px; }
header p { color: var(--muted); margin: 0 0 8px; max-width: 75ch; }
h1 { font-size: 1.5rem; line-height: 1.2; margin: 0 0 4px; }
h2 { font-size: 1.3rem; line-height: 1.25; margin: 44px 0 6px; padding-top: 14px; border-top: 2px solid var(--line); }
h3 { font-size: 1rem; line-height: 1.3; margin: 0 0 8px; }
p, li { max-width: 75ch; }
section p { margin: 6px 0 10px; }
.verdict { border: 2px solid var(--bad); border-left-width: 10px; background: var(--panel); padding: 18px 20px; margin-top: 16px; }
.verdict.good { border-color: var(--good); }
.verdict h2 { border: 0; padding: 0; margin: 0 0 6px; font-size: 1.6rem; color: var(--bad); }
.verdict.good h2 { color: var(--good); }
.asked { font-size: 2.4rem; font-weight: 650; line-height: 1.1; margin: 12px 0 0; }
.asked small { display: block; font-size: 1rem; font-weight: 400; color: var(--muted); margin-top: 4px; }
.verdict.good { display: grid; grid-template-columns: minmax(0, 2fr) minmax(0, 3fr); grid-template-rows: auto auto 1fr; gap: 0 32px; }
.verdict.good h2, .verdict.good > p:first-of-type { grid-column: 1; }
.verdict.good .facts { grid-column: 2; grid-row: 1 / span 3; margin: 0; }
.facts { margin: 12px 0 0; padding-left: 20px; }
.note { color: var(--muted); font-size: .92rem; }
.figures { display: grid; grid-template-columns: repeat(auto-fill, minmax(min(100%, 400px), 1fr)); gap: 20px; margin: 14px 0; }
figure, .panel { margin: 0; background: var(--panel); border: 1px solid var(--line); padding: 14px; min-width: 0; }
figure.alone { max-width: 700px; margin: 14px 0; }
figure svg.chart { display: block; width: 100%; max-width: 560px; height: auto; }
figure.alone svg.chart { max-width: 670px; }
svg text { font-family: ${FONT}; }
figcaption { color: var(--muted); font-size: .88rem; line-height: 1.45; margin-top: 8px; }
figcaption p { margin: 4px 0 0; }
.legend { list-style: none; display: flex; flex-wrap: wrap; gap: 4px 16px; margin: 8px 0 0; padding: 0; font-size: .88rem; line-height: 1.4; }
.legend svg { width: 34px; height: 14px; vertical-align: -2px; margin-right: 6px; }
.wide { overflow-x: auto; margin: 12px 0; }
table { border-collapse: collapse; width: 100%; font-size: .92rem; font-variant-numeric: tabular-nums; }
caption { text-align: left; color: var(--muted); padding-bottom: 6px; }
th, td { text-align: left; vertical-align: top; padding: 7px 12px 7px 0; border-bottom: 1px solid var(--line); }
thead th { border-bottom-width: 2px; }
td.number, th.number { text-align: right; }
td.number { white-space: nowrap; }
.first .note { font-weight: 400; }
tr.first th, tr.first td { font-weight: 650; }
.holds { color: var(--good); } .fails { color: var(--bad); }
.panel dl { margin: 0; font-size: .92rem; }
dt { font-weight: 650; } dd { margin: 0 0 8px; max-width: 75ch; }
footer { color: var(--muted); font-size: .88rem; padding-top: 30px; padding-bottom: 40px; }
@media (max-width: 640px) {
  body { font-size: 15px; }
  main, header, footer { padding-left: 12px; padding-right: 12px; }
  figure { padding: 10px; }
  .asked { font-size: 2rem; }
  .verdict.good { display: block; }
  .verdict.good .facts { margin-top: 12px; }
  table.stacks thead { display: none; }
  table.stacks tr { display: block; border-bottom: 2px solid var(--line); padding: 6px 0; }
  table.stacks th, table.stacks td { display: block; border: 0; padding: 1px 0; text-align: left; white-space: normal; }
  table.stacks td[data-label]::before { content: attr(data-label) ": "; color: var(--muted); font-weight: 400; }
}
@media print {
  body { font-size: 11pt; background: #fff; }
  main, header, footer { max-width: none; padding: 0; }
  figure, tr, .verdict { break-inside: avoid; }
  h2, h3 { break-after: avoid; }
  * { print-color-adjust: exact; -webkit-print-color-adjust: exact; }
}
`;
