/**
 * How few new runs are shared out: what is needed to calibrate at the asked confidence, else the highest confidence that
 * half of them allow, K / (K + 1) for K calibration runs (numerator of the split-conformal rank, statistics.ts).
 */
import { conformalRank } from "../num/statistics.js";

export interface NewRunPlan {
  readonly split: { readonly fit: number; readonly calibration: number; readonly test: number };
  readonly confidence: number;
  readonly isLowered: boolean;
}

export interface AskedSplit {
  readonly confidence: number;
  readonly split: NewRunPlan["split"];
}

const FEWEST = 4;

/** Throws nothing; null when there are fewer than four runs. */
export function planNewRuns(count: number, { confidence, split }: AskedSplit): NewRunPlan | null {
  if (count < FEWEST) return null;
  const calibration = Math.round(split.calibration * count);
  const test = Math.round(split.test * count);
  const isEnough = test >= 1 && count - calibration - test >= 2 && conformalRank(calibration, 1 - confidence) !== null;
  if (isEnough) return { split, confidence, isLowered: false };
  const held = Math.floor((3 * count) / 8);
  const allowed = Math.floor((1000 * held) / (held + 1)) / 1000;
  const share = held / count;
  return {
    split: { fit: 1 - share, calibration: share, test: 0 },
    confidence: Math.min(confidence, allowed),
    isLowered: allowed < confidence,
  };
}
