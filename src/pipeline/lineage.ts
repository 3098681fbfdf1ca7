/** A run, the run that it refits, and so on, newest first. */
import { existsSync } from "node:fs";
import type { Summary } from "../report/artifacts.js";
import { quantity } from "../report/format.js";
import { FILES } from "./artifacts.js";
import { type Manifest, openRunFolder, type RunFolder, runDigest } from "./runFolder.js";

export interface Ancestor {
  readonly path: string;
  readonly text: string;
}

export function lineageOf(folder: RunFolder): Ancestor[] {
  const lineage: Ancestor[] = [];
  let here: RunFolder | null = folder;
  let expected: string | null = null;
  while (here !== null) {
    const manifest: Manifest | null = here.manifest();
    if (manifest === null) break;
    const isAsThen = expected === null || runDigest(manifest) === expected;
    lineage.push({
      path: here.path,
      text: `${wordsOf(here)}${isAsThen ? "" : "; changed since it was refitted from"}`,
    });
    const parent: Manifest["parent"] = manifest.parent ?? null;
    if (parent !== null && !existsSync(parent.path)) {
      lineage.push({ path: parent.path, text: "no longer there" });
      break;
    }
    expected = parent?.digest ?? null;
    here = parent === null ? null : openRunFolder(parent.path, false);
  }
  return lineage;
}

function wordsOf(folder: RunFolder): string {
  if (!folder.has(FILES.summary)) return "not finished";
  const { certificates, goal, disturbance } = folder.readJson<Summary>(FILES.summary);
  const learned = certificates.find(({ name }) => name === "learned");
  const margin = learned?.margins[goal.name];
  if (learned === undefined || margin === undefined) return "no margin";
  return `${goal.name} ${quantity(margin, goal.unit, "up")}, ${learned.evidence}, confidence ${disturbance.confidence}`;
}
