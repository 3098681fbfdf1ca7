/**
 * YAML text -> plain values, and the line and column of every key, value and character inside a value. YAML 1.2 core
 * schema (yaml.org, 2021), keys are text. Refused with their place: syntax errors, keys written twice, aliases without
 * an anchor, tags that are not understood.
 */
import {
  type Alias,
  type Document,
  isAlias,
  isMap,
  isScalar,
  isSeq,
  LineCounter,
  type Node,
  parseDocument,
  Scalar,
  visit,
  type YAMLError,
} from "yaml";
import type { Path, Problem } from "./problems.js";

export interface YamlSource {
  /** Plain values; undefined when the text is no YAML. */
  readonly value: unknown;
  readonly problems: readonly Problem[];
  /** Start of the value at a path, or of the deepest part of the path that is there. */
  valuePlace(path: Path): { line: number; column: number };
  /** Start of the key at a path. */
  keyPlace(path: Path): { line: number; column: number };
  /** Place of a character of the text at a path. */
  textPlace(path: Path, offset: number): { line: number; column: number };
}

/** Deepest nesting of maps and lists; a plant file needs 6. */
const MAX_DEPTH = 40;

export function readYaml(text: string): YamlSource {
  const deep = tooDeep(text);
  if (deep !== null) return unreadable({ ...deep, message: `maps or lists are nested more than ${MAX_DEPTH} deep` });
  const lines = new LineCounter();
  const document: Document = parseDocument(text, { lineCounter: lines, prettyErrors: false, stringKeys: true });
  const place = (offset: number): { line: number; column: number } => {
    const { line, col } = lines.linePos(Math.min(Math.max(offset, 0), text.length));
    return { line: Math.max(line, 1), column: Math.max(col, 1) };
  };
  const problems: Problem[] = [];
  for (const error of [...document.errors, ...document.warnings]) {
    const at = place(error.pos[0]);
    // one mistake can make the parser complain many times at one place
    if (problems.some(({ line, column }) => line === at.line && column === at.column)) continue;
    problems.push({ ...at, message: errorMessage(error, text) });
  }
  const isReadable = document.errors.every((error) => error.code === "DUPLICATE_KEY");
  visit(document, {
    Alias(_, node) {
      if (node.resolve(document) !== undefined) return undefined;
      const message = `alias '*${node.source}' has no anchor '&${node.source}' before it; write the value itself`;
      problems.push({ ...place(node.range?.[0] ?? 0), message });
      const empty = new Scalar(null);
      empty.range = node.range ?? null;
      return empty;
    },
  });
  visit(document, {
    Pair(_, { key }) {
      if (!isScalar(key) || key.value !== "__proto__") return;
      problems.push({ ...place(key.range?.[0] ?? 0), message: "key '__proto__' is not allowed; use another name" });
    },
  });
  let value: unknown;
  try {
    if (isReadable) value = document.toJS();
  } catch (error) {
    problems.push({ line: 1, column: 1, message: `the YAML cannot be expanded: ${(error as Error).message}` });
  }
  return {
    value,
    problems,
    valuePlace: (path) => place(startOf(walk(document, path).value) ?? 0),
    keyPlace: (path) => {
      const { key, value: at } = walk(document, path);
      return place(startOf(key ?? at) ?? 0);
    },
    textPlace: (path, offset) => {
      const { value: node } = walk(document, path);
      return place(isScalar(node) ? sourceOffset(text, node, offset) : (startOf(node) ?? 0));
    },
  };
}

/**
 * Where the text nests deeper than MAX_DEPTH. Found before parsing, because the parser recurses. Brackets in text and
 * comments count too: more than MAX_DEPTH unclosed ones are refused.
 */
function tooDeep(text: string): { line: number; column: number } | null {
  const indents: number[] = [];
  let open = 0;
  for (const [i, line] of text.split("\n").entries()) {
    const lead = /^[ \t]*([-?:][ \t]+)*/.exec(line)![0];
    const markers = lead.replace(/[ \t]/g, "").length;
    const indent = lead.length;
    while (indents.length > 0 && indents.at(-1)! >= indent) indents.pop();
    indents.push(indent);
    for (let column = 0; column < line.length; column++) {
      if (line[column] === "[" || line[column] === "{") open++;
      if (line[column] === "]" || line[column] === "}") open = Math.max(0, open - 1);
      if (open + indents.length + markers > MAX_DEPTH) return { line: i + 1, column: column + 1 };
    }
  }
  return null;
}

function unreadable(problem: Problem): YamlSource {
  const place = (): { line: number; column: number } => ({ line: 1, column: 1 });
  return { value: undefined, problems: [problem], valuePlace: place, keyPlace: place, textPlace: place };
}

function errorMessage({ code, message, pos }: YAMLError, text: string): string {
  switch (code) {
    case "DUPLICATE_KEY":
      return `key '${keyText(text, pos[0])}' is written twice in the same map; keep one`;
    case "MULTIPLE_DOCS":
      return "a plant file is one YAML document; remove '---' and what follows or precedes it";
    case "NON_STRING_KEY":
      return "a list or a map cannot be a key; write a name";
    default: {
      const given = text.slice(pos[0], pos[1]).split("\n")[0]!.slice(0, 30).trim();
      return `no valid YAML${given === "" ? "" : ` at '${given}'`}: ${message}`;
    }
  }
}

function keyText(text: string, from: number): string {
  return /^[^:\s,{}]*/.exec(text.slice(from, from + 60))![0];
}

/** Key and value nodes at a path; where it ends early, those of its deepest part that is there. */
function walk(document: Document, path: Path): { key: Node | null; value: Node | null } {
  let key: Node | null = null;
  let value: Node | null = document.contents as Node | null;
  for (const step of path) {
    if (isAlias(value)) value = (value as Alias).resolve(document) ?? null;
    if (isMap(value)) {
      // of a key written twice the last is the one whose value counts
      const pair = value.items.findLast((item) => isScalar(item.key) && String(item.key.value) === String(step));
      if (pair === undefined) return { key, value };
      key = pair.key as Node;
      value = (pair.value as Node | null) ?? key;
    } else if (isSeq(value) && typeof step === "number") {
      const item = value.items[step] as Node | undefined;
      if (item === undefined) return { key, value };
      key = null;
      value = item;
    } else return { key, value };
  }
  return { key, value };
}

function startOf(node: Node | null): number | null {
  return node?.range?.[0] ?? null;
}

/**
 * Offset in the file of a character of a scalar's text. Quotes, indentation and folding change only blanks (and escapes,
 * which formulas do not need), so the k-th character that is no blank is the k-th one of the source as well.
 */
function sourceOffset(text: string, node: Scalar, offset: number): number {
  const value = String(node.value);
  const [start, end] = node.range!;
  const isBlock = node.type === "BLOCK_FOLDED" || node.type === "BLOCK_LITERAL";
  const isQuoted = node.type === "QUOTE_DOUBLE" || node.type === "QUOTE_SINGLE";
  let at = isBlock ? text.indexOf("\n", start) + 1 : start + (isQuoted ? 1 : 0);
  let toSkip = value.slice(0, offset).replace(/\s/g, "").length;
  if (value.slice(offset).trim() === "") {
    // just behind the last character
    for (; at < end && toSkip > 0; at++) if (!/\s/.test(text[at]!)) toSkip--;
    return at;
  }
  for (; at < end; at++) {
    if (/\s/.test(text[at]!)) continue;
    if (toSkip === 0) break;
    toSkip--;
  }
  return at;
}
