/** What a certificate says, in words and in the numbers that it may show: a number stands only where it holds. */
import type { CertificateSummary, Evidence, Summary } from "./artifacts.js";
import { number, plural, share } from "./format.js";

export const EVIDENCE_MEANING: Readonly<Record<Evidence, string>> = {
  sampled:
    "Worst over evenly spread points, then driven to a local worst by ascent. It finds failures; it cannot show that there are none.",
  counted:
    "All claims are tried at fresh random points after everything is fixed. It bounds the share of the envelope's volume where any claim fails, at the stated confidence; a small bad spot can stay unseen.",
  proved:
    "Interval arithmetic with outward rounding covers whole boxes of states, given the disturbance bound. Every state in the proved share is covered.",
};

export const STATUS_WORDS: Readonly<Record<CertificateSummary["status"], { mark: string; words: string }>> = {
  holds: { mark: "✓", words: "holds" },
  fails: { mark: "✕", words: "fails" },
  authorityExceeded: { mark: "▲", words: "over the authority limit" },
  roomExceeded: { mark: "▲", words: "leaves plans too little room" },
  absent: { mark: "–", words: "none found" },
};

/** Words that belong to every margin. */
export const MARGIN_RESTS_ON =
  "For plans inside the part of the envelope given for plans. Continuous, exact state feedback is assumed: sampling, lag and estimate errors come on top.";

export const STANDARDS_CAUTION =
  "This report replaces no standard and no judgement of a qualified person: not ISO 3691-4 (driverless industrial trucks), ISO 18497 (autonomous farm machines), EN 15011 (gantry cranes) or ISO 13849-1 (safety functions of control systems). Local codes and licensed practice decide.";

export function learnedCertificate(summary: Summary): CertificateSummary | null {
  return summary.certificates.find(({ name }) => name === "learned") ?? null;
}

export function holding(summary: Summary): CertificateSummary[] {
  return summary.certificates.filter(({ status }) => status === "holds");
}

/**
 * The asked margin in the goal's unit; null where the certificate does not hold. Throws when one that holds lacks it.
 */
export function askedMargin(summary: Summary, certificate: CertificateSummary): number | null {
  if (certificate.status !== "holds") return null;
  const margin = certificate.margins[summary.goal.name];
  if (margin === undefined) {
    const given = Object.keys(certificate.margins).join(", ") || "none";
    throw new Error(
      `summary: certificate '${certificate.name}' holds but has no margin '${summary.goal.name}' (given: ${given}); goal.name must be a key of its margins`,
    );
  }
  return margin;
}

/** The largest share of any input's half-range; null where the certificate does not hold or the plant names none. */
export function largestAuthority(certificate: CertificateSummary): number | null {
  const shares = Object.values(certificate.authority);
  return certificate.status !== "holds" || shares.length === 0 ? null : Math.max(...shares);
}

export function goalWords({ goal }: Summary): string {
  return goal.direction === "" || goal.direction === goal.name
    ? `margin '${goal.name}'`
    : `margin '${goal.name}' (${goal.direction})`;
}

/** What is known, weakest first, one sentence an entry. */
export function evidenceSentences(certificate: CertificateSummary): string[] {
  const { counted, failingShareUpper, provedRate, provedShare, worstRate } = certificate;
  const sentences: string[] = [];
  if (worstRate !== null)
    sentences.push(`Sampled: the worst contraction rate found by search is ${number(worstRate, "down")} 1/s.`);
  if (counted !== null && failingShareUpper !== null) {
    sentences.push(
      `Counted: ${plural(counted.failures, "failure")} in ${counted.points} fresh random points, so with ` +
        `${share(counted.confidence, "down")} confidence the claims fail on at most ${share(failingShareUpper, "up")} of the envelope's volume.`,
    );
  } else sentences.push("Counted: not done.");
  if (provedRate !== null && provedShare > 0) {
    sentences.push(
      `Proved: a rate of ${number(provedRate, "down")} 1/s on ${share(provedShare, "down")} of the envelope's volume.`,
    );
  } else sentences.push("Proved: nothing.");
  return sentences;
}
