/**
 * One certificate with all its evidence: sampled, counted, proved. The tube's numbers are claims, each worse than what
 * sampling saw by an allowance; the proof is of these claims. When the smaller allowance is not proved, the larger is tried.
 */
import type { ControlAffineModel } from "../model/controlAffine.js";
import { seededRandom } from "../num/random.js";
import type { RateChoice } from "../tube/chooseRate.js";
import type { CountedEvidence } from "../verify/counted.js";
import type { ProofResult } from "../verify/proof/prove.js";
import { PROOF_GAP } from "../verify/proof/sampledClaims.js";
import {
  type Certification,
  type CertifiedTube,
  certifyMetric,
  SAMPLED_ALLOWANCE,
  type TubeQuestion,
} from "./certifyMetric.js";
import { type ProofRun, proveClaims, type SavedCertificate, tubeClaims } from "./proveTube.js";

export interface Certificate {
  readonly certification: Certification;
  readonly allowance: number;
  /** Null without a tube. */
  readonly proof: ProofResult | null;
}

const ALLOWANCES = [SAMPLED_ALLOWANCE, PROOF_GAP];

export async function certify(
  model: ControlAffineModel,
  subject: SavedCertificate,
  question: TubeQuestion,
  seed: number,
  run: ProofRun,
): Promise<Certificate> {
  let tried: Certificate | null = null;
  for (const allowance of ALLOWANCES) {
    const random = seededRandom(seed).stream("counted");
    const certification = certifyMetric(model, subject.metric, question, allowance, random);
    if (certification.tube === null) return tried ?? { certification, allowance, proof: null };
    const claims = tubeClaims(certification.tube, Array.from(question.wbar));
    const proof = await proveClaims(subject, claims, run);
    tried = { certification, allowance, proof };
    if (proof.status === "proved") return tried;
  }
  return tried!;
}

/** What is saved of a certificate; scaled units as in the types that it holds. */
export interface CertificateFile {
  readonly name: string;
  /** Words on how the metric was made, or why there is none. */
  readonly note: string;
  /** Null: there is no metric. */
  readonly evidence: {
    /** 1/s; null: infinite, as many inputs as states, or the metric is not positive definite somewhere. */
    readonly worstRate: number | null;
    /** Active coordinates of the worst state, scaled. */
    readonly worstState: readonly number[];
    readonly choice: RateChoice;
    readonly tube: CertifiedTube | null;
    readonly counted: CountedEvidence | null;
    readonly allowance: number;
    readonly proof: ProofFile | null;
  } | null;
}

export interface ProofFile {
  readonly status: ProofResult["status"];
  readonly provedRate: number | null;
  readonly provedShare: number;
  readonly refutedShare: number;
  readonly openShare: number;
  readonly boxes: number;
  readonly leaves: number;
  /** Claims that stopped boxes, most frequent first. */
  readonly stoppedBy: readonly string[];
  /** The first refuted point, active coordinates, scaled. */
  readonly refutedAt: readonly number[] | null;
  /** Share by which the claims are worse than the sampled extremes. */
  readonly claims: ProofResult["claims"];
}

export function certificateFile(name: string, note: string, certificate: Certificate | null): CertificateFile {
  if (certificate === null) return { name, note, evidence: null };
  const { certification, allowance, proof } = certificate;
  const { survey, choice, tube, counted } = certification;
  return {
    name,
    note,
    evidence: {
      worstRate: Number.isFinite(survey.worst.rate) ? survey.worst.rate : null,
      worstState: Array.from(survey.worst.at),
      choice,
      tube,
      counted,
      allowance,
      proof: proof === null ? null : proofFile(proof, Number.isFinite(survey.worst.rate)),
    },
  };
}

/** Where every state is actuated any rate holds: the claimed one is what is said to be proved. */
function proofFile(proof: ProofResult, isRateBounded: boolean): ProofFile {
  const { status, provedRate, provedShare, refutedShare, openShare, boxes, leaves, refuted, claims } = proof;
  const names = ["rate", "push", "spread", "authority", "definite"];
  const counts = names.map((name, i) => ({ name, count: leaves.claim.filter((claim) => claim === i + 1).length }));
  return {
    status,
    provedRate: isRateBounded || provedRate === null ? provedRate : claims.rate,
    provedShare,
    refutedShare,
    openShare,
    boxes,
    leaves: leaves.count,
    stoppedBy: counts
      .filter(({ count }) => count > 0)
      .sort((a, b) => b.count - a.count)
      .map(({ name }) => name),
    refutedAt: refuted.length === 0 ? null : Array.from(refuted[0]!.at),
    claims,
  };
}
