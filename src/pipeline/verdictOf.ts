/** The answer to what was asked, in one or two plain sentences. */
import type { Plant } from "../plant/plant.js";
import type { CertificateSummary, Summary, Verdict } from "../report/artifacts.js";
import { quantity, share } from "../report/format.js";

export interface VerdictSources {
  readonly plant: Plant;
  readonly goal: Summary["goal"];
  readonly certificates: readonly CertificateSummary[];
  readonly unsupportedShare: number;
  /** Every part of the envelope has logs near, or the user accepts that some has not. */
  readonly isSupported: boolean;
}

export function verdictOf({ goal, certificates, unsupportedShare, isSupported }: VerdictSources): Verdict {
  const learned = certificates.find(({ name }) => name === "learned");
  if (learned === undefined || learned.status !== "holds") {
    const why = learned === undefined || learned.reason === "" ? "" : `: ${learned.reason}`;
    return { holds: false, text: `The learned metric gives no margin${why}.` };
  }
  if (!isSupported) {
    return {
      holds: false,
      text:
        `The certificate holds for the fitted model, but the logs hold no states in ${share(unsupportedShare, "up")} of the ` +
        "envelope, where that model is a guess. Record runs there, make the envelope smaller, or say 'unsupported: accept' under logs.",
    };
  }
  const margin = learned.margins[goal.name]!;
  const others = certificates.filter(({ status, name }) => status === "holds" && name !== "learned");
  const best = others.reduce<CertificateSummary | null>(
    (a, b) => (a === null || b.margins[goal.name]! < a.margins[goal.name]! ? b : a),
    null,
  );
  const against =
    best === null
      ? "No analytic metric gives a margin within the authority limit."
      : `The smallest analytic margin is ${quantity(best.margins[goal.name]!, goal.unit, "up")} (${best.title}).`;
  return {
    holds: true,
    text: `Tracking stays within ${quantity(margin, goal.unit, "up")}${goal.direction === goal.name ? ` of the plan in ${goal.name}` : ` of the plan, ${goal.direction}`} (${learned.evidence}). ${against}`,
  };
}
