/** A seeded split by run: fit, calibration, test. Runs, not samples, are exchangeable. */
import type { Random } from "../num/random.js";
import { LogError } from "./logError.js";
import type { Run } from "./recording.js";

export interface SplitRuns {
  readonly fit: readonly Run[];
  readonly calibration: readonly Run[];
  readonly test: readonly Run[];
}

/** Throws LogError when a part would be empty, with the number of runs needed. */
export function splitRuns(
  runs: readonly Run[],
  shares: { readonly fit: number; readonly calibration: number; readonly test: number },
  random: Random,
): SplitRuns {
  const count = runs.length;
  const calibration = Math.round(shares.calibration * count);
  const test = Math.round(shares.test * count);
  const fit = count - calibration - test;
  if (fit < 2 || calibration < 1 || (test < 1 && shares.test > 0)) {
    const needed = Math.ceil(Math.max(2 / shares.fit, 1 / shares.calibration, shares.test > 0 ? 1 / shares.test : 0));
    throw new LogError(
      [...new Set(runs.map((run) => run.file))].join(", "),
      null,
      `${count} runs cannot be split into fit, calibration and test parts; at least ${needed} are needed with these shares`,
    );
  }
  const order = random.permutation(count);
  const pick = (from: number, to: number): Run[] => order.slice(from, to).map((i) => runs[i]!);
  return { fit: pick(0, fit), calibration: pick(fit, fit + calibration), test: pick(fit + calibration, count) };
}
