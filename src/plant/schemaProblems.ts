/**
 * Mistakes of form in a plant file (plantSchema.ts) in words, and the draft that is left without them.
 */
import type { z } from "zod";
import { type JsonSchema, plantJsonSchema, schemaAt } from "./jsonSchema.js";
import { nearestName } from "./nearestName.js";
import { type PlantDraft, type PlantFile, plantSchema } from "./plantSchema.js";
import type { Path, Report } from "./problems.js";

/** The file if its form is right; the draft in any case. Every mistake of form is reported. */
export function checkForm(value: unknown, report: Report): { file: PlantFile | null; draft: PlantDraft } {
  const parsed = plantSchema.safeParse(value);
  if (parsed.success) return { file: parsed.data, draft: parsed.data };
  const schema = plantJsonSchema();
  const draft: unknown = structuredClone(value);
  const misspelt = reportUnknownKeys(value, parsed.error.issues, schema, report);
  for (const issue of parsed.error.issues) {
    const path = issue.path as Path;
    if (issue.code === "unrecognized_keys") {
      for (const key of issue.keys) removeAt(draft, [...path, key]);
      continue;
    }
    const given = valueAt(value, path);
    if (given === undefined && misspelt.has(JSON.stringify(path))) continue;
    reportIssue(issue, path, given, schema, report);
    const isDeclared = path[0] === "states" || path[0] === "inputs";
    if (issue.code === "invalid_key" && !isDeclared) dropAt(draft, path);
    else removeAt(draft, path);
  }
  return { file: null, draft: (isObject(draft) ? draft : {}) as PlantDraft };
}

/** Returns the paths of the missing keys that an unknown one was probably meant to be. */
function reportUnknownKeys(
  value: unknown,
  issues: readonly z.core.$ZodIssue[],
  schema: JsonSchema,
  report: Report,
): Set<string> {
  const misspelt = new Set<string>();
  for (const issue of issues) {
    if (issue.code !== "unrecognized_keys") continue;
    const path = issue.path as Path;
    const allowed = Object.keys(schemaAt(schema, path)?.properties ?? {});
    const given = valueAt(value, path);
    const free = allowed.filter((key) => !(isObject(given) && Object.hasOwn(given, key)));
    for (const key of issue.keys) {
      const suggestion = nearestName(key, free) ?? nearestName(key, allowed);
      if (suggestion !== null) misspelt.add(JSON.stringify([...path, suggestion]));
      const where = path.length === 0 ? "the plant file" : `'${path.join(".")}'`;
      report([...path, key], `unknown key '${key}' in ${where}; allowed are ${allowed.join(", ")}`, {
        key: true,
        suggestion,
      });
    }
  }
  return misspelt;
}

function reportIssue(issue: z.core.$ZodIssue, path: Path, given: unknown, schema: JsonSchema, report: Report): void {
  const meaning = schemaAt(schema, path)?.description ?? "";
  const last = path.at(-1);
  if (path.length === 0) {
    report(path, `the plant file must be a map of keys such as plant, states, inputs and rates, got ${show(given)}`);
  } else if (issue.code === "invalid_key") {
    report(path, `'${last}' is no name; a name is a letter, then letters, digits or _, at most 40`, { key: true });
  } else if (given === undefined) {
    report(path, `'${last}' is missing${path.length > 1 ? ` in '${path.slice(0, -1).join(".")}'` : ""}: ${meaning}`, {
      key: true,
    });
  } else {
    const wanted = issue.code === "invalid_union" ? "" : ` (${inYamlWords(issue.message)})`;
    report(path, `'${path.join(".")}' is ${show(given)}${wanted}; allowed: ${meaning}`);
  }
}

const YAML_WORDS: readonly (readonly [RegExp, string])[] = [
  [/^Invalid input: /, ""],
  [/\b(record|object)\b/g, "map"],
  [/\b(array|tuple)\b/g, "list"],
  [/\bstring\b/g, "text"],
  [/\bint\b/g, "whole number"],
];

function inYamlWords(message: string): string {
  return YAML_WORDS.reduce((text, [word, by]) => text.replace(word, by), message);
}

function show(value: unknown): string {
  if (value === null) return "empty";
  if (typeof value === "number") return `${value}`;
  if (Array.isArray(value)) return `a list of ${value.length}`;
  if (isObject(value)) return "a map";
  const text = JSON.stringify(value) ?? "nothing";
  return text.length > 40 ? `${text.slice(0, 40)}...` : text;
}

function valueAt(value: unknown, path: Path): unknown {
  let at = value;
  for (const step of path) {
    if (!isObject(at) || !Object.hasOwn(at, step)) return undefined;
    at = (at as Record<string | number, unknown>)[step];
  }
  return at;
}

/** The key stays, so that a name is still known where it is used and the places of list entries stay right. */
function removeAt(value: unknown, path: Path): void {
  const parent = valueAt(value, path.slice(0, -1));
  const last = path.at(-1);
  if (isObject(parent) && last !== undefined && Object.hasOwn(parent, last))
    (parent as Record<string | number, unknown>)[last] = undefined;
}

function dropAt(value: unknown, path: Path): void {
  const parent = valueAt(value, path.slice(0, -1));
  if (isObject(parent)) delete (parent as Record<string | number, unknown>)[path.at(-1)!];
}

function isObject(value: unknown): value is object {
  return typeof value === "object" && value !== null;
}
