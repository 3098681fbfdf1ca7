/**
 * The report: one HTML file that needs nothing else. Sections top to bottom as a reader asks: does it hold, against
 * what, how large is it, what does it cost, where does it fail, what does it rest on, how is it repeated.
 */
import type { Evidence, Pictures, Summary } from "./artifacts.js";
import { EVIDENCE_MEANING, STANDARDS_CAUTION } from "./certificateWords.js";
import { comparisonTable, envelopeTable, everyMargin } from "./comparisonTable.js";
import { coverage } from "./coverage.js";
import { disturbanceTable } from "./disturbanceTable.js";
import { figures } from "./figure.js";
import { duration, plural } from "./format.js";
import { marginBars } from "./marginBars.js";
import { type Markup, markup } from "./markup.js";
import { list, page, section } from "./page.js";
import { rateMaps } from "./rateMap.js";
import { residualFigures } from "./residualCurves.js";
import { scores } from "./scores.js";
import { tradeOff } from "./tradeOff.js";
import { trainingHistory } from "./trainingHistory.js";
import { tubeDrawing } from "./tubeDrawing.js";
import { verdictSection } from "./verdict.js";

/**
 * The whole page; equal results give equal bytes. Throws when a certificate that holds lacks the asked margin.
 */
export async function renderReport(summary: Summary, pictures: Pictures): Promise<string> {
  const sections = [
    section("comparison", "Learned against analytic", [
      comparisonTable(summary),
      figures([...(summary.certificates.length > 0 ? [await marginBars(summary)] : []), evidenceWords()]),
    ]),
    section("scale", "The margin to scale", [
      tubeDrawing(summary, pictures),
      everyMargin(summary),
      envelopeTable(summary),
    ]),
    section("authority", "What a smaller margin costs", [await tradeOff(summary, pictures)]),
    section("rate", "Where it contracts", [await rateMaps(summary, pictures)]),
    section("disturbance", "Disturbance bound", [
      disturbanceTable(summary),
      figures([await scores(summary, pictures)]),
    ]),
    section("residual", "Missing dynamics", [await residualFigures(summary, pictures)]),
    section("coverage", "What the logs cover", [logWords(pictures), await coverage(pictures)]),
    section("training", "Training history", [await trainingHistory(summary, pictures)]),
    section("assumptions", "Assumptions", [list(summary.assumptions, "No assumption was recorded.")]),
    section("cautions", "Cautions", [list([...summary.cautions, STANDARDS_CAUTION], "")]),
    section("repeat", "How to repeat it", [repeat(summary)]),
  ];
  return page({
    title: `Tracking margin of ${summary.plant}`,
    description: summary.description,
    main: [verdictSection(summary), ...sections],
    footer:
      "Made by Fairlead from the saved results of one run. The numbers are those of summary.json beside this file.",
  });
}

function evidenceWords(): Markup {
  const entries = (Object.keys(EVIDENCE_MEANING) as Evidence[]).map(
    (word) => markup`<dt>${word}</dt><dd>${EVIDENCE_MEANING[word]}</dd>`,
  );
  return markup`<div class="panel"><h3>What the evidence words mean</h3><dl>${entries}</dl><p class="note">A tube is worth its weakest part.</p></div>`;
}

function logWords({ coverage: { runs, findings } }: Pictures): Markup {
  return markup`<p>${plural(runs.fit, "run")} for the fit, ${runs.calibration} for the calibration of the bound, ${runs.test} for the test. The split is by run.</p>${findings.length === 0 ? null : list(findings, "")}`;
}

function repeat({ seed, engine, seconds }: Summary): Markup {
  const rejected = engine.rejected.map(({ name, reason }) => `${name} was not used: ${reason}`);
  const stages = Object.entries(seconds);
  const total = stages.reduce((sum, [, time]) => sum + time, 0);
  const rows = stages.map(
    ([stage, time]) => markup`<tr><th scope="row">${stage}</th><td class="number">${duration(time)}</td></tr>`,
  );
  return markup`<p>Seed ${seed}; learning engine ${engine.name}, version ${engine.version}. The same plant file, logs, seed and engine give the same tables and numbers, byte for byte, but for the times. The manifest in the run folder holds the hashes of all inputs.</p>
${rejected.length === 0 ? null : list(rejected, "")}
${stages.length === 0 ? null : markup`<div class="wide"><table style="max-width: 26rem"><caption>Seconds by stage</caption><tbody>${rows}<tr class="first"><th scope="row">all</th><td class="number">${duration(total)}</td></tr></tbody></table></div>`}`;
}
