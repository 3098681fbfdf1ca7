/** The verdict and the comparison as plain text for a terminal. */
import Table from "cli-table3";
import picocolors from "picocolors";
import type { CertificateSummary, Summary } from "./artifacts.js";
import {
  askedMargin,
  evidenceSentences,
  goalWords,
  largestAuthority,
  learnedCertificate,
  MARGIN_RESTS_ON,
  STATUS_WORDS,
} from "./certificateWords.js";
import { quantity, share } from "./format.js";

export interface TableStyle {
  /** Columns of the terminal. */
  readonly width: number;
  readonly color: boolean;
}

/** Narrower than this, every certificate is a short list of its own. */
const TABLE_WIDTH = 76;
const LEAST_WIDTH = 24;
/** Columns of numbers: margin, authority, rate, with their spaces. */
const NUMBER_COLUMNS = [13, 11, 13] as const;
const BORDERS = 6;

/** Lines joined by line feeds, none longer than the width; without a line feed at the end. */
export function summaryTable(summary: Summary, { width, color }: TableStyle): string {
  const columns = Math.max(LEAST_WIDTH, Math.floor(width));
  const paint = picocolors.createColors(color);
  const { holds, text } = summary.verdict;
  const head = holds ? paint.green("✓ holds") : paint.red("✕ does not hold");
  const learned = learnedCertificate(summary);
  const evidence = learned === null || learned.status === "absent" ? [] : evidenceSentences(learned);
  const comparison =
    summary.certificates.length === 0
      ? []
      : columns < TABLE_WIDTH
        ? narrow(summary, columns)
        : [wide(summary, columns)];
  return [
    ...wrapped(summary.plant, columns),
    head,
    ...wrapped(text, columns),
    "",
    ...wrapped(`Asked ${goalWords(summary)}:`, columns),
    ...comparison,
    ...(evidence.length === 0 ? [] : wrapped("Evidence of the learned metric:", columns)),
    ...evidence.flatMap((sentence) => wrapped(sentence, columns)),
    ...wrapped(MARGIN_RESTS_ON, columns),
  ].join("\n");
}

function numbers(summary: Summary, certificate: CertificateSummary): readonly [string, string, string] {
  const margin = askedMargin(summary, certificate);
  const authority = largestAuthority(certificate);
  const rate = certificate.status === "holds" ? certificate.rate : null;
  return [
    margin === null ? "none" : quantity(margin, summary.goal.unit, "up"),
    authority === null ? "none" : share(authority, "up"),
    rate === null ? "none" : quantity(rate, "1/s", "down"),
  ];
}

function outcome({ status, evidence, reason }: CertificateSummary): string {
  const { mark, words } = STATUS_WORDS[status];
  if (status === "holds") return `${mark} ${words}, ${evidence}`;
  return reason === "" ? `${mark} ${words}` : `${mark} ${words}: ${reason}`;
}

function wide(summary: Summary, columns: number): string {
  const rest = columns - BORDERS - NUMBER_COLUMNS.reduce((a, b) => a + b, 0);
  const first = Math.floor(rest / 2);
  const table = new Table({
    head: ["certificate", "margin", "authority", "rate", "outcome"],
    colWidths: [first, ...NUMBER_COLUMNS, rest - first],
    colAligns: ["left", "right", "right", "right", "left"],
    wordWrap: true,
    // the library's own colours, off
    style: { head: [], border: [] },
  });
  for (const certificate of summary.certificates)
    table.push([certificate.title, ...numbers(summary, certificate), outcome(certificate)]);
  return table.toString();
}

function narrow(summary: Summary, columns: number): string[] {
  return summary.certificates.flatMap((certificate) => {
    const [margin, authority, rate] = numbers(summary, certificate);
    const lines = [outcome(certificate)];
    if (certificate.status === "holds") lines.push(`margin ${margin}`, `authority ${authority}`, `rate ${rate}`);
    return [
      ...wrapped(certificate.title, columns),
      ...lines.flatMap((line) => wrapped(line, columns - 2).map((part) => `  ${part}`)),
    ];
  });
}

/** Breaks at spaces, and within a word that is longer than the width. */
function wrapped(text: string, columns: number): string[] {
  const lines: string[] = [];
  let line = "";
  for (const word of text.split(/\s+/).flatMap((long) => long.match(new RegExp(`.{1,${columns}}`, "gu")) ?? [])) {
    if (line !== "" && line.length + 1 + word.length > columns) {
      lines.push(line);
      line = word;
    } else line = line === "" ? word : `${line} ${word}`;
  }
  return line === "" ? lines : [...lines, line];
}
