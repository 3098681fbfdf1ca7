// Reading plant files in tests, and finding places in their text.
import type { Plant } from "../../src/plant/plant.js";
import { formatProblems, type Problem, readPlant } from "../../src/plant/readPlant.js";

export function plantOf(text: string): Plant {
  const result = readPlant(text, "/fields/configs/plant.yaml");
  if (!result.ok) throw new Error(formatProblems("plant.yaml", result.problems));
  return result.plant;
}

export function problemsOf(text: string): readonly Problem[] {
  const result = readPlant(text, "/fields/configs/plant.yaml");
  return result.ok ? [] : result.problems;
}

/** The example with one piece of text replaced; the piece must be there. */
export function changed(text: string, ...swaps: readonly (readonly [string, string])[]): string {
  return swaps.reduce((now, [from, to]) => {
    if (!now.includes(from)) throw new Error(`no '${from}' in the example`);
    return now.replace(from, to);
  }, text);
}

/** Line and column, from 1, of the n-th occurrence of a piece of text. */
export function placeOf(text: string, piece: string, nth = 1): { line: number; column: number } {
  let at = -1;
  for (let i = 0; i < nth; i++) at = text.indexOf(piece, at + 1);
  if (at < 0) throw new Error(`no '${piece}'`);
  const before = text.slice(0, at).split("\n");
  return { line: before.length, column: before.at(-1)!.length + 1 };
}
