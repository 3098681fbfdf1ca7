/** The page of a refit: what changed, before against after, and whether the planner's margins must grow. */
import { STANDARDS_CAUTION, STATUS_WORDS } from "./certificateWords.js";
import type { Change, Pair, Refit } from "./changeArtifacts.js";
import { figure, figures, legend, lineSwatch } from "./figure.js";
import { number, quantity, type Rounding, share } from "./format.js";
import { type Markup, markup } from "./markup.js";
import { list, page, section } from "./page.js";
import { FIRST, MUTED, SECOND } from "./theme.js";
import { axisTitle, vegaChart } from "./vegaChart.js";

export async function changePage(change: Change): Promise<string> {
  const { refit } = change;
  return page({
    title: `What changed: ${change.plant}`,
    description: `New runs held against the run in ${change.parent}.`,
    main: [
      verdict(change),
      section("drift", "Do the new runs fit the earlier certificate", [list(change.drift, "")]),
      ...(refit === null ? [] : await refitSections(refit)),
      section("cautions", "Cautions", [list([STANDARDS_CAUTION], "")]),
    ],
    footer:
      "Made by Fairlead from the saved results of two runs. The numbers are those of change.json beside this file.",
  });
}

function verdict({ refit, isChanged, drift }: Change): Markup {
  const isGood = refit === null ? !isChanged : !refit.planner.mustGrow;
  const text = refit === null ? drift[0]! : refit.planner.text;
  const head = refit === null ? "Nothing refitted" : refit.planner.mustGrow ? "Margins must grow" : "Margins may stay";
  return markup`<section class="verdict${isGood ? " good" : ""}" aria-labelledby="verdict">
<h2 id="verdict"><span aria-hidden="true">${isGood ? "✓" : "✕"}</span> ${head}</h2>
<p>${text}</p>
</section>`;
}

async function refitSections(refit: Refit): Promise<Markup[]> {
  const up = (value: number | null, unit: string): string => (value === null ? "none" : quantity(value, unit, "up"));
  return [
    section("margins", "Margins and certificate", [
      table("Margins and authority of the learned certificate.", [
        ...refit.margins.map(({ name, unit, before, after }) => row(name, up(before, unit), up(after, unit))),
        ...refit.authority.map(({ name, before, after }) =>
          row(`authority of ${name}`, shareOf(before, "up"), shareOf(after, "up")),
        ),
        row("tube rate", rate(refit.rate.before), rate(refit.rate.after)),
        row("outcome", STATUS_WORDS[refit.status.before].words, STATUS_WORDS[refit.status.after].words),
        row("evidence", refit.evidence.before, refit.evidence.after),
        row(
          "confidence of the disturbance bound",
          share(refit.confidence.before, "down"),
          share(refit.confidence.after, "down"),
        ),
      ]),
      markup`<p>${refit.regions.text}</p>`,
    ]),
    section("leftover", "What stays unexplained", [
      table(
        "Disturbance bounds.",
        refit.bounds.map(({ name, unit, before, after }) => row(name, up(before, unit), up(after, unit))),
      ),
      table(
        "Error over windows of held-out new runs.",
        refit.residual.map(({ name, unit, before, after }) => row(name, quantity(before, unit), quantity(after, unit))),
      ),
    ]),
    section("residual", "Missing dynamics", [figures(await Promise.all(refit.curves.map(curveFigure)))]),
  ];
}

function rate(value: number | null): string {
  return value === null ? "none" : quantity(value, "1/s", "down");
}

function shareOf(value: number | null, rounding: Rounding): string {
  return value === null ? "none" : share(value, rounding);
}

function table(caption: string, rows: readonly Markup[]): Markup {
  return markup`<div class="wide"><table class="stacks"><caption>${caption}</caption>
<thead><tr><th scope="col">Of</th><th scope="col" class="number">Before</th><th scope="col" class="number">After</th></tr></thead>
<tbody>${rows}</tbody></table></div>`;
}

function row(name: string, before: string, after: string): Markup {
  return markup`<tr><th scope="row">${name}</th><td class="number" data-label="Before">${before}</td><td class="number" data-label="After">${after}</td></tr>`;
}

async function curveFigure({ after, before }: Refit["curves"][number], index: number): Promise<Markup> {
  const { title, unit, x: along } = after;
  const points = (values: readonly number[]) => along.values.map((x, i) => ({ x, y: values[i]! }));
  const encoding = {
    x: {
      field: "x",
      type: "quantitative",
      title: axisTitle(along.name, along.unit),
      scale: { nice: false, zero: false },
    },
    y: { field: "y", type: "quantitative", title: axisTitle("term", unit) },
  };
  const line = (values: readonly number[], color: string, strokeDash: readonly number[]) => ({
    data: { values: points(values) },
    mark: { type: "line", color, strokeWidth: 2.5, strokeDash },
    encoding,
  });
  const least: Pair<string> = { before: number(Math.max(...before)), after: number(Math.max(...after.fitted)) };
  const picture = await vegaChart(
    {
      layer: [
        { data: { values: [{ y: 0 }] }, mark: { type: "rule", color: MUTED }, encoding: { y: encoding.y } },
        line(before, SECOND, [6, 3]),
        line(after.fitted, FIRST, []),
      ],
    },
    {
      key: `change-${index}`,
      label: `Fitted term, ${title}, along ${along.name}: at most ${least.before} before and ${least.after} after, in ${unit}.`,
    },
  );
  return figure({
    title: `Fitted term: ${title}`,
    picture,
    legend: legend([
      { swatch: lineSwatch(SECOND, [6, 3]), text: "before" },
      { swatch: lineSwatch(FIRST, []), text: "after" },
    ]),
    shows: `The term along ${along.name}, all other states at the middle of the envelope.`,
    showsNot: "The term elsewhere; where the new logs hold no states it keeps much of its earlier shape.",
  });
}
