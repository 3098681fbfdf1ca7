/** The outcome of the drift test in plain words, the answer first. */
import type { Plant } from "../plant/plant.js";
import { number, plural, share } from "../report/format.js";
import type { Drift, DriftedChannel } from "../residual/drift.js";
import type { BoundFile } from "./artifacts.js";

/** Runs from which the reading of a change can be trusted. */
const ENOUGH_RUNS = 3;

export function driftWords(plant: Plant, drift: Drift, bound: BoundFile): string[] {
  const { runs, pValue, isChanged, level, earlierRuns } = drift;
  const under = runs.filter(({ isUnderBound }) => isUnderBound).length;
  const answer = isChanged
    ? `The vehicle has changed: the new runs are not like the ${earlierRuns} held-out runs of the earlier fit (p = ${number(pValue)}).`
    : `No change was found: the new runs are like the ${earlierRuns} held-out runs of the earlier fit (p = ${number(pValue)}); the earlier certificate still covers them.`;
  return [
    answer,
    `${under} of ${plural(runs.length, "new run")} stay under the earlier bound throughout; at least ${share(bound.confidence, "down")} of runs like the earlier ones do.`,
    `The test is exact and calls at most ${share(level, "up")} of unchanged fleets changed. It cannot show that nothing has changed.`,
    ...drift.channels
      .filter(({ isMoved }) => isMoved)
      .map((channel) => channelWords(plant, channel, runs.length >= ENOUGH_RUNS)),
  ];
}

function channelWords(plant: Plant, { channel, growth, reading }: DriftedChannel, isEnough: boolean): string {
  const { name } = plant.leftover[channel]!;
  const grown = `${name}: the worst windows are ${number(growth)} times what they were`;
  if (reading === null || !isEnough) return `${grown}; too few runs to say why.`;
  if (reading.kind === "missingRate") {
    return `${grown}, and follow the states (${share(Math.max(0, reading.explainedByStates), "down")} of their variance): the missing dynamics are others now.`;
  }
  if (reading.kind === "inputGain") {
    const input = plant.inputs[reading.input!]!.name;
    return `${grown}, and follow the input ${input} (${share(reading.explainedByInputs, "down")} of their variance): its gain is another now.`;
  }
  return `${grown}, but follow neither states nor inputs: only the leftover is larger.`;
}
