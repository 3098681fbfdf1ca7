/**
 * Text of a plant file -> Plant, or every mistake in it with its line and column.
 *
 *   YAML -> form -> names and units -> formulas -> structure -> settings -> compiled rates, checked -> Plant
 *
 * A step works on what the ones before left whole, so that all mistakes come in one go. No file is read here.
 */
import { seededRandom } from "../num/random.js";
import { reportCompiled } from "./compiledProblems.js";
import { compileRates } from "./compileRates.js";
import type { Plant } from "./plant.js";
import type { Problem, Report } from "./problems.js";
import { readQuantities } from "./readQuantities.js";
import { readRates } from "./readRates.js";
import { checkSettings, logSource, plantSettings } from "./readSettings.js";
import { readSymmetry, readUnknowns } from "./readStructure.js";
import { checkForm } from "./schemaProblems.js";
import { readYaml, type YamlSource } from "./yamlSource.js";

export { formatProblems, type Problem } from "./problems.js";

/** Longest plant file, in characters. */
export const MAX_TEXT = 200_000;

/** The sections that the compiled rates and their checks rest on. */
const MODEL = ["states", "inputs", "parameters", "rates", "unknown", "leftover", "symmetry"];

export type PlantResult =
  | { readonly ok: true; readonly plant: Plant }
  /** In the order of the file. */
  | { readonly ok: false; readonly problems: readonly Problem[] };

/** `path` is the plant file's own path, best absolute: log files are resolved against its folder. */
export function readPlant(text: string, path: string): PlantResult {
  if (text.length > MAX_TEXT) {
    const message = `the plant file has ${text.length} characters; at most ${MAX_TEXT} are allowed`;
    return { ok: false, problems: [{ line: 1, column: 1, message }] };
  }
  const source = readYaml(text);
  const problems: Problem[] = [...source.problems];
  if (source.value === undefined) return { ok: false, problems };
  const broken = new Set<string>();
  const report = reporter(source, problems, broken);

  const { file, draft } = checkForm(source.value, report);
  const quantities = readQuantities(draft, report);
  if (quantities === null) return { ok: false, problems: inFileOrder(problems) };
  const formulas = readRates(draft, quantities, report);
  const symmetry = readSymmetry(draft, quantities, report);
  const unknowns = readUnknowns(draft, quantities, symmetry, report);
  checkSettings(draft, quantities, symmetry, report);
  const isModelWhole = source.problems.length === 0 && !MODEL.some((section) => broken.has(section));
  if (!isModelWhole) return { ok: false, problems: inFileOrder(problems) };

  const rates = compileRates(formulas.expressions);
  const random = seededRandom(file?.seed ?? 1).stream("plant check");
  reportCompiled(rates, quantities, formulas, symmetry, unknowns, random, report);
  if (file === null || problems.length > 0) return { ok: false, problems: inFileOrder(problems) };
  const plant: Plant = {
    name: file.plant,
    description: file.description.trim(),
    states: quantities.states,
    inputs: quantities.inputs,
    leftover: formulas.leftover,
    unknowns,
    symmetry,
    logs: logSource(file, path, quantities),
    settings: plantSettings(file, quantities, symmetry),
    expressions: formulas.expressions,
    rates,
  };
  return { ok: true, plant };
}

function reporter(source: YamlSource, problems: Problem[], broken: Set<string>): Report {
  return (path, message, { key = false, offset, suggestion } = {}) => {
    broken.add(String(path[0] ?? ""));
    const place =
      offset !== undefined ? source.textPlace(path, offset) : key ? source.keyPlace(path) : source.valuePlace(path);
    // what stands in for broken YAML is no mistake of its own
    if (source.problems.some(({ line, column }) => line === place.line && column === place.column)) return;
    const isMeant = suggestion !== undefined && suggestion !== null;
    problems.push({ ...place, message, ...(isMeant ? { suggestion } : {}) });
  };
}

function inFileOrder(problems: readonly Problem[]): Problem[] {
  return problems.toSorted((a, b) => a.line - b.line || a.column - b.column);
}
