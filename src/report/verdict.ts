/** The answer, first on the page: holds or not, the asked margin, how it is known. */
import type { Summary } from "./artifacts.js";
import {
  askedMargin,
  evidenceSentences,
  goalWords,
  holding,
  largestAuthority,
  learnedCertificate,
  MARGIN_RESTS_ON,
} from "./certificateWords.js";
import { plural, quantity, share } from "./format.js";
import { type Markup, markup } from "./markup.js";

export function verdictSection(summary: Summary): Markup {
  const { verdict, disturbance } = summary;
  const learned = learnedCertificate(summary);
  const margin = verdict.holds && learned !== null ? askedMargin(summary, learned) : null;
  const authority = margin !== null && learned !== null ? largestAuthority(learned) : null;
  const facts = [
    ...(authority === null
      ? []
      : [`Tracking may use up to ${share(authority, "up")} of an input's half-range; plans must leave that free.`]),
    `Disturbance: with at least ${share(disturbance.confidence, "down")} confidence a new run of the same kind stays under the bound throughout (${plural(disturbance.calibrationRuns, "calibration run")}).`,
    ...(learned === null || learned.status === "absent" ? [] : evidenceSentences(learned)),
    ...(margin === null ? [insteadSentence(summary)] : [MARGIN_RESTS_ON]),
  ];
  return markup`<section class="verdict${verdict.holds ? " good" : ""}" aria-labelledby="verdict">
<h2 id="verdict"><span aria-hidden="true">${verdict.holds ? "✓" : "✕"}</span> ${verdict.holds ? "Holds" : "Does not hold"}</h2>
<p>${verdict.text}</p>
${margin === null ? null : markup`<p class="asked">${quantity(margin, summary.goal.unit, "up")}<small>asked ${goalWords(summary)}, learned metric</small></p>`}
<ul class="facts">${facts.map((fact) => markup`<li>${fact}</li>`)}</ul>
</section>`;
}

function insteadSentence(summary: Summary): string {
  const others = holding(summary)
    .filter(({ name }) => name !== "learned")
    .map(
      (certificate) =>
        `${certificate.title} (${quantity(askedMargin(summary, certificate)!, summary.goal.unit, "up")})`,
    );
  return others.length === 0
    ? "No certificate gives a margin: there is no number to use."
    : `Analytic certificates that do hold: ${others.join("; ")}.`;
}
