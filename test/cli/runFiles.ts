// What a run folder must look like, and its bytes without the wall clock.
import { createHash } from "node:crypto";
import { readdirSync, readFileSync } from "node:fs";
import { join } from "node:path";
import { tableFromIPC } from "apache-arrow";
import { FILES } from "../../src/pipeline/artifacts.js";

/** Files of a plain run that holds; drift and change belong to a refit. */
export const RUN_FILES = Object.values(FILES).filter(
  (name) => ![FILES.drift, FILES.change, FILES.changePage].some((other) => other === name),
);

export function readJson<T>(folder: string, name: string): T {
  return JSON.parse(readFileSync(join(folder, name), "utf8")) as T;
}

/** Hash by file name, manifest left out and wall seconds blanked. */
export function bytesOf(folder: string): Record<string, string> {
  const names = readdirSync(folder).filter((name) => name !== "manifest.json");
  const seconds = Object.values(readJson<{ seconds: Record<string, number> }>(folder, "summary.json").seconds);
  return Object.fromEntries(
    names.sort().map((name) => {
      const bytes = readFileSync(join(folder, name));
      const timed = name === "summary.json" || name === "report.html";
      const plain = timed ? withoutSeconds(bytes.toString("utf8"), seconds) : bytes;
      return [name, createHash("sha256").update(plain).digest("hex")];
    }),
  );
}

/** Whatever names a number of seconds: the summary's list, and the page's words on it. */
function withoutSeconds(text: string, seconds: readonly number[]): string {
  const list = text.replace(/"seconds": \{[^}]*\}/, '"seconds": {}');
  return seconds.length === 0 ? list : list.replace(/[\d.]+ s\b/g, "s").replace(/[\d.]+ min\b/g, "min");
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
