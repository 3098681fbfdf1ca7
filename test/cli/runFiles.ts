// What a run folder must look like, and its bytes without the wall clock.
import { createHash } from "node:crypto";
import { readdirSync, readFileSync } from "node:fs";
import { join } from "node:path";
import { tableFromIPC } from "apache-arrow";
import { ANALYTIC_KINDS, FILES } from "../../src/pipeline/artifacts.js";

/** Files of a plain run that holds; drift and change belong to a refit. */
export const RUN_FILES = [
  ...Object.values(FILES).filter(
    (name) => ![FILES.drift, FILES.change, FILES.changePage].some((other) => other === name),
  ),
  ...ANALYTIC_KINDS.map(({ file }) => file),
];

export function readJson<T>(folder: string, name: string): T {
  return JSON.parse(readFileSync(join(folder, name), "utf8")) as T;
}

/** Hash by file name, manifest left out and wall seconds blanked. */
export function bytesOf(folder: string): Record<string, string> {
  const names = readdirSync(folder).filter((name) => name !== "manifest.json");
  return Object.fromEntries(
    names.sort().map((name) => {
      const bytes = readFileSync(join(folder, name));
      const timed = name === "summary.json" || name === "report.html";
      const plain = timed ? withoutSeconds(bytes.toString("utf8")) : bytes;
      return [name, createHash("sha256").update(plain).digest("hex")];
    }),
  );
}

/** The summary's list, and the cells of the page's table of it. */
function withoutSeconds(text: string): string {
  return text
    .replace(/"seconds": \{[^}]*\}/, '"seconds": {}')
    .replace(/<td class="number">[\d.]+ (s|min)( \d+ s)?<\/td>/g, '<td class="number">time</td>');
}

/** Throws when any file is half-written; `.part` files, which are never read, do not count. */
export function assertWhole(folder: string): void {
  for (const name of readdirSync(folder)) {
    const bytes = readFileSync(join(folder, name));
    if (name.endsWith(".json")) JSON.parse(bytes.toString("utf8"));
    if (name.endsWith(".arrow")) {
      const table = tableFromIPC(bytes);
      for (const field of table.schema.fields) table.getChild(field.name)?.get(table.numRows - 1);
    }
    if (name.endsWith(".html") && !bytes.toString("utf8").trimEnd().endsWith("</html>"))
      throw new Error(`${name} is cut`);
  }
}
