/**
 * Clopper, C. and Pearson, E., "The use of confidence or fiducial limits illustrated in the case of the binomial",
 * Biometrika 26, 1934: limits by beta quantiles. Split conformal rank: Vovk, Gammerman and Shafer, "Algorithmic
 * Learning in a Random World", 2005 (the ceil((K+1)(1-alpha))-th smallest of K scores).
 */
import betaQuantile from "@stdlib/stats-base-dists-beta-quantile";

/** One-sided upper limit of a share at `confidence`, from `failures` in `trials`. */
export function clopperPearsonUpper(failures: number, trials: number, confidence: number): number {
  return failures >= trials ? 1 : betaQuantile(confidence, failures + 1, trials - failures);
}

/** One-sided lower limit of a share at `confidence`. */
export function clopperPearsonLower(failures: number, trials: number, confidence: number): number {
  return failures <= 0 ? 0 : betaQuantile(1 - confidence, failures, trials - failures + 1);
}

/** Rank (1-based) of the calibration score that bounds a new run with probability 1 - alpha; null: too few scores. */
export function conformalRank(count: number, alpha: number): number | null {
  const rank = Math.ceil((count + 1) * (1 - alpha) - 1e-9);
  return rank <= count ? rank : null;
}

/** Least number of calibration runs for a finite bound at alpha. */
export function runsNeeded(alpha: number): number {
  return Math.ceil(1 / alpha - 1 - 1e-9);
}
