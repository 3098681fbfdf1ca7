/** All certificates side by side, and the margins of every state where there are any. */
import type { CertificateSummary, Summary } from "./artifacts.js";
import {
  askedMargin,
  goalWords,
  holding,
  largestAuthority,
  MARGIN_RESTS_ON,
  STATUS_WORDS,
} from "./certificateWords.js";
import { number, quantity, type Rounding, range, share } from "./format.js";
import { type Markup, markup } from "./markup.js";

export function comparisonTable(summary: Summary): Markup {
  if (summary.certificates.length === 0) return markup`<p class="note">No certificate was made.</p>`;
  const rows = summary.certificates.map((certificate) => comparisonRow(summary, certificate));
  return markup`<div class="wide"><table class="stacks">
<caption>Asked ${goalWords(summary)}. ${MARGIN_RESTS_ON}</caption>
<thead><tr><th scope="col">Certificate</th><th scope="col">Outcome</th><th scope="col" class="number">Margin</th><th scope="col" class="number">Authority</th><th scope="col" class="number">Tube rate</th><th scope="col" class="number">Worst rate</th><th scope="col">Evidence</th></tr></thead>
<tbody>${rows}</tbody></table></div>`;
}

function comparisonRow(summary: Summary, certificate: CertificateSummary): Markup {
  const { mark, words } = STATUS_WORDS[certificate.status];
  const holds = certificate.status === "holds";
  const margin = askedMargin(summary, certificate);
  const authority = largestAuthority(certificate);
  const none = "none";
  return markup`<tr${certificate.name === "learned" ? markup` class="first"` : null}><th scope="row">${certificate.title}</th>
<td data-label="Outcome"><span class="${holds ? "holds" : "fails"}">${mark} ${words}</span>${certificate.reason === "" ? null : markup`<br/><span class="note">${certificate.reason}</span>`}</td>
<td class="number" data-label="Margin">${margin === null ? none : quantity(margin, summary.goal.unit, "up")}</td>
<td class="number" data-label="Authority">${authority === null ? none : share(authority, "up")}</td>
<td class="number" data-label="Tube rate">${holds && certificate.rate !== null ? quantity(certificate.rate, "1/s", "down") : none}</td>
<td class="number" data-label="Worst rate">${certificate.worstRate === null ? none : quantity(certificate.worstRate, "1/s", "down")}</td>
<td data-label="Evidence">${evidenceCell(certificate)}</td></tr>
`;
}

function evidenceCell({ status, evidence, failingShareUpper, counted, provedShare }: CertificateSummary): string {
  if (status !== "holds") return "none: no margin to support";
  const count =
    failingShareUpper === null || counted === null
      ? ""
      : `; fails on at most ${share(failingShareUpper, "up")} of the volume at ${share(counted.confidence, "down")} confidence`;
  return `${evidence}${count}${provedShare > 0 ? `; ${share(provedShare, "down")} proved` : ""}`;
}

/** Margins of every direction and authority of every input, one column a holding certificate. */
export function everyMargin(summary: Summary): Markup {
  const certificates = holding(summary);
  if (certificates.length === 0) return markup``;
  const unitOf = new Map(summary.states.map(({ name, unit }) => [name, unit]));
  const names = [...new Set(certificates.flatMap(({ margins }) => Object.keys(margins)))];
  const position = positionUnit(summary, certificates[0]!);
  const margins = names.map((name) => {
    const unit = unitOf.get(name) ?? position;
    return row(name, unit, certificates, ({ margins: of }) => textOf(of[name], (value) => number(value, "up")));
  });
  const inputs = summary.inputs.map(({ name }) =>
    row(`authority of ${name}`, "% of half-range", certificates, ({ authority }) =>
      textOf(authority[name], (value) => number(100 * value, "up")),
    ),
  );
  return markup`<h3>Every margin and authority</h3><div class="wide"><table class="stacks">
<caption>${MARGIN_RESTS_ON}</caption>
<thead><tr><th scope="col">Of</th><th scope="col">Unit</th>${certificates.map(({ title }) => markup`<th scope="col" class="number">${title}</th>`)}</tr></thead>
<tbody>${margins}${inputs}</tbody></table></div>`;
}

/** Unit of the position pair: the goal's where the goal is planar, else that of the states whose margin equals planar. */
export function positionUnit({ goal, states }: Summary, { margins }: CertificateSummary): string {
  if (["across", "along", "planar"].includes(goal.name)) return goal.unit;
  return states.find(({ name }) => margins[name] === margins.planar)?.unit ?? "unit of the position";
}

/** The box that the claims cover and the part of it that is left for plans. */
export function envelopeTable({ envelope, states, inputs }: Summary): Markup {
  const inward: readonly [Rounding, Rounding] = ["up", "down"];
  const rows = [
    ...states.map((state) => ({ ...state, of: envelope.states, plans: envelope.plans?.states })),
    ...inputs.map((input) => ({ ...input, of: envelope.inputs, plans: envelope.plans?.inputs })),
  ].map(({ name, unit, of, plans }) => {
    const whole = of[name];
    const part = plans?.[name];
    return markup`<tr><th scope="row">${name}</th><td data-label="Envelope">${whole === undefined ? "any" : range(whole, unit, inward)}</td><td data-label="Plans">${planText(whole, part, unit, inward, plans !== undefined)}</td></tr>`;
  });
  return markup`<h3>Where the claim holds</h3><div class="wide"><table class="stacks">
<caption>The envelope covers the claims; plans must stay in the part on the right, which leaves room for margin and authority.</caption>
<thead><tr><th scope="col">State or input</th><th scope="col">Envelope</th><th scope="col">Plans</th></tr></thead>
<tbody>${rows}</tbody></table></div>`;
}

function planText(
  whole: readonly [number, number] | undefined,
  part: readonly [number, number] | undefined,
  unit: string,
  inward: readonly [Rounding, Rounding],
  hasPlans: boolean,
): string {
  if (part !== undefined) return range(part, unit, inward);
  if (!hasPlans) return "none: there is no margin";
  return whole === undefined ? "any" : "any: the claims do not depend on it";
}

function row(
  name: string,
  unit: string,
  certificates: readonly CertificateSummary[],
  cell: (certificate: CertificateSummary) => string,
): Markup {
  return markup`<tr><th scope="row">${name}</th><td data-label="unit">${unit}</td>${certificates.map((certificate) => markup`<td class="number" data-label="${certificate.title}">${cell(certificate)}</td>`)}</tr>`;
}

function textOf(value: number | undefined, write: (value: number) => string): string {
  return value === undefined ? "none" : write(value);
}
