/**
 * The page of a tube along a plan: does the plan hold, how large are its margins beside the fixed tube's, when and where,
 * what do they rest on. One self-contained file, like the report.
 */
import { EVIDENCE_MEANING, STANDARDS_CAUTION } from "./certificateWords.js";
import { number, plural, quantity, share } from "./format.js";
import { type Markup, markup } from "./markup.js";
import { list, page, section } from "./page.js";
import type { PlanMargin, PlanPicture, PlanSummary, PlanValue } from "./planArtifacts.js";
import { planCharts } from "./planCharts.js";
import { planDrawing } from "./planDrawing.js";

/** Equal results give equal bytes. */
export async function renderPlanPage(summary: PlanSummary, picture: PlanPicture): Promise<string> {
  const hasNumbers = picture.rows.length > 0;
  return page({
    title: `Tube along a plan of ${summary.plant}`,
    description: summary.description,
    main: [
      verdict(summary),
      ...(hasNumbers
        ? [
            section("margins", "Along the plan against fixed", marginTable(summary)),
            section("scale", "The plan to scale", await planDrawing(summary, picture)),
            section("time", "Over time", await planCharts(summary, picture)),
          ]
        : []),
      section("assumptions", "What the numbers rest on", [
        markup`<p>Law: ${summary.law}.</p>`,
        list(summary.assumptions, ""),
        markup`<p class="note">${STANDARDS_CAUTION}</p>`,
      ]),
    ],
    footer: "Made by Fairlead from the saved results of one run and one plan. The numbers are those of plan-tube.json.",
  });
}

const HEADINGS = {
  whole: { mark: "✓", words: "Holds along the whole plan" },
  ends: { mark: "✕", words: "Ends before the plan does" },
  refused: { mark: "✕", words: "Plan refused" },
} as const;

function verdict(summary: PlanSummary): Markup {
  const { mark, words } = HEADINGS[summary.status];
  const asked = askedOf(summary);
  return markup`<section class="verdict${summary.status === "whole" ? " good" : ""}" aria-labelledby="verdict">
<h2 id="verdict"><span aria-hidden="true">${mark}</span> ${words}</h2>
<p>${summary.text}</p>
${
  summary.status !== "whole" || asked.largest === null
    ? null
    : markup`<p class="asked">${quantity(asked.largest, asked.unit, "up")}<small>largest margin '${asked.name}' along the plan; ${asked.fixed === null ? "no fixed margin" : `fixed ${quantity(asked.fixed, asked.unit, "up")}`}</small></p>`
}
<ul class="facts">${factsOf(summary).map((fact) => markup`<li>${fact}</li>`)}</ul>
</section>`;
}

function factsOf({
  plan,
  status,
  evidence,
  cells,
  authority,
  fixedHolds,
  fixedMisfit,
  motionShare,
}: PlanSummary): string[] {
  const given = `Plan: ${plural(plan.samples, "sample")} from ${number(plan.from)} s to ${quantity(plan.until, "s")}.`;
  if (status === "refused") return [given, "There is no number to use."];
  return [
    given,
    `Evidence: ${evidence}, over ${plural(cells, "cell")} around the plan. ${EVIDENCE_MEANING[evidence]}`,
    ...(authority.largest === null
      ? []
      : [
          `Tracking may use up to ${share(authority.largest, "up")} of an input's half-range along this plan${authority.fixed === null ? "" : `; the fixed tube reserves ${share(authority.fixed, "up")} everywhere`}.`,
        ]),
    !fixedHolds
      ? "The certificate does not hold all over the envelope: there is no fixed tube to compare with."
      : fixedMisfit === null
        ? "With the fixed margins this plan would fit as well."
        : `With the fixed margins this plan would not fit: ${fixedMisfit}.`,
    `The plan's own jumps against the fitted model push up to ${share(motionShare, "up")} of what the disturbance may; they are in the numbers.`,
  ];
}

function askedOf({ margins, goal }: PlanSummary): PlanMargin {
  const asked = margins.find(({ name }) => name === goal);
  if (asked === undefined)
    throw new Error(
      `plan summary: no margin '${goal}' (given: ${margins.map(({ name }) => name).join(", ")}); goal must be one of them`,
    );
  return asked;
}

function marginTable({ margins, authority, radius }: PlanSummary): Markup {
  const row = (name: string, unit: string, { fixed, largest, mean }: PlanValue, write: (value: number) => string) => {
    const cell = (label: string, value: number | null): Markup =>
      markup`<td class="number" data-label="${label}">${value === null ? "none" : write(value)}</td>`;
    return markup`<tr><th scope="row">${name}</th><td data-label="Unit">${unit}</td>${cell("Fixed", fixed)}${cell("Largest", largest)}${cell("Mean", mean)}</tr>`;
  };
  const up = (value: number): string => number(value, "up");
  return markup`<div class="wide"><table class="stacks">
<caption>Fixed: one number for every plan in the envelope, at rest. Largest and mean: over time along this plan.</caption>
<thead><tr><th scope="col">Margin of</th><th scope="col">Unit</th><th scope="col" class="number">Fixed</th><th scope="col" class="number">Largest along the plan</th><th scope="col" class="number">Mean along the plan</th></tr></thead>
<tbody>${margins.map((margin) => row(margin.name, margin.unit, margin, up))}${row("authority", "% of half-range", authority, (value) => number(100 * value, "up"))}${row("tube radius", "metric", radius, up)}</tbody></table></div>`;
}
