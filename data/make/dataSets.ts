/** The six bundled data sets: a plant and the same plant after a hardware change. */
import { EMPTY_TANK, FULL_TANK, orchardRover } from "./orchardRover.js";
import type { Truth } from "./simulate.js";
import { BARE_HULL, surveyBoat, WITH_POD } from "./surveyBoat.js";
import { HEAVY_HOOK, LIGHT_HOOK, yardCrane } from "./yardCrane.js";

export interface DataSet {
  readonly name: string;
  readonly truth: Truth;
  readonly runs: number;
  /** s, each run. */
  readonly seconds: number;
  readonly seed: number;
}

export const DATA_SETS: readonly DataSet[] = [
  { name: "orchard-rover", truth: orchardRover(EMPTY_TANK), runs: 72, seconds: 18, seed: 101 },
  { name: "orchard-rover-tank", truth: orchardRover(FULL_TANK), runs: 36, seconds: 18, seed: 102 },
  { name: "yard-crane", truth: yardCrane(LIGHT_HOOK), runs: 96, seconds: 14, seed: 201 },
  { name: "yard-crane-hook", truth: yardCrane(HEAVY_HOOK), runs: 40, seconds: 14, seed: 202 },
  { name: "survey-boat", truth: surveyBoat(BARE_HULL), runs: 230, seconds: 7, seed: 309 },
  { name: "survey-boat-pod", truth: surveyBoat(WITH_POD), runs: 90, seconds: 7, seed: 302 },
];
