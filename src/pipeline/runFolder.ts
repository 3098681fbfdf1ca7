/**
 * The run folder: artifacts written whole or not at all, and a manifest that says which stage made which file from
 * which inputs. A stage whose inputs and files are unchanged is not run again; a run killed at any moment goes on from
 * the last whole stage.
 */
import { createHash } from "node:crypto";
import {
  closeSync,
  existsSync,
  fsyncSync,
  mkdirSync,
  openSync,
  readdirSync,
  readFileSync,
  renameSync,
  rmSync,
  writeFileSync,
} from "node:fs";
import { join } from "node:path";

export interface StageRecord {
  /** Hash over everything the stage read. */
  readonly inputs: string;
  /** SHA-256 by file name. */
  readonly files: Readonly<Record<string, string>>;
  readonly seconds: number;
}

export interface Manifest {
  readonly format: 1;
  readonly tool: { readonly name: "fairlead"; readonly version: string; readonly code: string };
  readonly runtime: string;
  /** Where the plant file was read: its log paths are relative to this. */
  readonly plantPath: string;
  /** SHA-256 of the plant file and of every log, by name. */
  readonly inputs: Readonly<Record<string, string>>;
  readonly seed: number;
  /** The run that this one refits. */
  readonly parent: { readonly path: string; readonly digest: string } | null;
  readonly engine: { readonly name: string; readonly version: string } | null;
  readonly stages: Readonly<Record<string, StageRecord>>;
}

/** A run folder that cannot be used as asked: the message says what to do. */
export class RunFolderError extends Error {}

const MANIFEST = "manifest.json";
const TEMPORARY = ".part";

export interface RunFolder {
  readonly path: string;
  manifest(): Manifest | null;
  writeManifest(manifest: Manifest): void;
  has(name: string): boolean;
  readText(name: string): string;
  readJson<T>(name: string): T;
  writeText(name: string, text: string): void;
  writeJson(name: string, value: unknown): void;
  /** Absolute path of an artifact, for a reader or an atomic writer of its own. */
  file(name: string): string;
  hash(name: string): string;
  /** Removes an artifact, if it is there. */
  remove(name: string): void;
}

/** A folder for results that are no run of their own: made when it is not there, and written like a run folder. */
export function openResultFolder(path: string): RunFolder {
  mkdirSync(path, { recursive: true });
  return folderAt(path);
}

/** Opens DIR, making it when `create`; leftovers of a killed write are removed. */
export function openRunFolder(path: string, create: boolean): RunFolder {
  if (!existsSync(path)) {
    if (!create)
      throw new RunFolderError(`${path}: no such run folder; make one with 'fairlead run PLANT.yaml --out ${path}'`);
    reached(path, () => mkdirSync(path, { recursive: true }));
  }
  const entries = reached(path, () => readdirSync(path));
  if (entries.length > 0 && !entries.includes(MANIFEST) && entries.some((name) => !name.endsWith(TEMPORARY))) {
    throw new RunFolderError(
      `${path}: holds files but no ${MANIFEST}, so it is not a run folder; give a new or empty folder to --out`,
    );
  }
  for (const name of entries) if (name.endsWith(TEMPORARY)) rmSync(join(path, name), { force: true });
  return folderAt(path);
}

function folderAt(path: string): RunFolder {
  const file = (name: string): string => join(path, name);
  const readText = (name: string): string => {
    try {
      return readFileSync(file(name), "utf8");
    } catch {
      throw new RunFolderError(`${file(name)}: missing or unreadable; run the stage that makes it again`);
    }
  };
  const readJson = <T>(name: string): T => {
    try {
      return JSON.parse(readText(name)) as T;
    } catch (error) {
      if (error instanceof RunFolderError) throw error;
      throw new RunFolderError(`${file(name)}: not whole JSON; delete it and run the stage that makes it again`);
    }
  };
  const writeText = (name: string, text: string): void => writeWhole(file(name), text);
  const writeJson = (name: string, value: unknown): void => writeText(name, `${JSON.stringify(value, null, 1)}\n`);
  return {
    path,
    file,
    readText,
    readJson,
    writeText,
    writeJson,
    has: (name) => existsSync(file(name)),
    hash: (name) => sha256(readFileSync(file(name))),
    remove: (name) => rmSync(file(name), { force: true }),
    manifest: () => (existsSync(file(MANIFEST)) ? checked(file(MANIFEST), readJson<unknown>(MANIFEST)) : null),
    writeManifest: (manifest) => writeJson(MANIFEST, manifest),
  };
}

/** What the file system says of a path that cannot be a run folder, as misuse. */
function reached<T>(path: string, act: () => T): T {
  try {
    return act();
  } catch (error) {
    const { code } = error as NodeJS.ErrnoException;
    throw new RunFolderError(`${path}: no folder can be opened here (${code}); give a new or empty folder to --out`);
  }
}

function checked(path: string, value: unknown): Manifest {
  const { format, stages, plantPath, seed } = (value ?? {}) as Partial<Manifest>;
  const isManifest =
    format === 1 &&
    typeof stages === "object" &&
    stages !== null &&
    typeof plantPath === "string" &&
    Number.isInteger(seed);
  if (!isManifest)
    throw new RunFolderError(`${path}: not a manifest of format 1; delete the folder and make the run again`);
  return value as Manifest;
}

/** Hash over what the stages of a run made, but for the report, which holds wall seconds. */
export function runDigest({ stages }: Manifest): string {
  const made = Object.entries(stages).filter(([name]) => name !== "report");
  return sha256(JSON.stringify(made.map(([name, { files }]) => [name, files])));
}

export function sha256(data: string | Uint8Array): string {
  return createHash("sha256").update(data).digest("hex");
}

function writeWhole(path: string, text: string): void {
  const temporary = `${path}${TEMPORARY}`;
  const handle = openSync(temporary, "w");
  try {
    writeFileSync(handle, text);
    fsyncSync(handle);
  } finally {
    closeSync(handle);
  }
  renameSync(temporary, path);
}
