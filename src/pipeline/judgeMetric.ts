/** A quick word on a metric by the verifier: what it is worth, and the states where it is worst. */
import type { ControlAffineModel } from "../model/controlAffine.js";
import type { DualMetricFile } from "../nets/dualMetric.js";
import { dualMetric } from "../nets/dualMetric.js";
import { chooseRate } from "../tube/chooseRate.js";
import { batchRates } from "../verify/kernel/batchRates.js";
import { type Survey, survey } from "../verify/survey.js";
import { goalDirection, SAMPLED_ALLOWANCE, sampledExtremes, type TubeQuestion } from "./certifyMetric.js";

export interface QuickJudgement {
  /** Asked margin, scaled; null when there is none within the authority limit. */
  readonly margin: number | null;
  /** Rate of the tube, 1/s; null as the margin. */
  readonly rate: number | null;
  /** 1/s. */
  readonly worstRate: number;
  readonly seen: Survey;
}

/** A certificate is asked with its allowances: this share of the authority limit is left to a design. */
export const AUTHORITY_SHARE = 0.97;
const QUICK = { points: 1024, starts: 4 };

export function judgeMetric(model: ControlAffineModel, file: DualMetricFile, question: TubeQuestion): QuickJudgement {
  const seen = survey(model, dualMetric(file), QUICK, batchRates(model, file));
  const choice = chooseRate(sampledExtremes(model, seen, question, SAMPLED_ALLOWANCE), question);
  const point = choice.status === "chosen" ? choice.point : null;
  return { margin: point?.margin ?? null, rate: point?.rate ?? null, worstRate: seen.worst.rate, seen };
}

/** Active states that any claim at the rate hangs on: too slow, or the largest sigma, spread or authority. */
export function worstStates(
  { seen }: QuickJudgement,
  rate: number,
  question: TubeQuestion,
  most: number,
): Float64Array[] {
  const direction = goalDirection(question.goal, 0);
  return [
    seen.worst.at,
    ...seen.violations(rate, most).map(({ at }) => at),
    seen.sigma(question.wbar).at,
    seen.spread(direction).at,
    seen.authorityDensity(rate).at,
  ];
}
