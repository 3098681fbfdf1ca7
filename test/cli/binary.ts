// The real binary on small plants in temporary folders of its own.
import { type ChildProcess, spawn } from "node:child_process";
import { cpSync, mkdtempSync, readFileSync, rmSync, symlinkSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join, resolve } from "node:path";
import { onTestFinished } from "vitest";

export const ROOT = resolve(import.meta.dirname, "../..");
const BINARY = join(ROOT, "dist/bin/fairlead.js");

export interface Ended {
  readonly status: number | null;
  readonly signal: NodeJS.Signals | null;
  readonly out: string;
  readonly err: string;
}

export interface Started {
  readonly child: ChildProcess;
  /** What standard error holds so far. */
  readonly err: () => string;
  readonly ended: Promise<Ended>;
}

export const start = (...args: readonly string[]): Started => startAt(BINARY, args);

/** The built tool as it is now, in a folder: a build during a long test does not change it. Its binary. */
export function frozenBinary(folder: string): string {
  cpSync(join(ROOT, "dist"), join(folder, "dist"), { recursive: true });
  cpSync(join(ROOT, "package.json"), join(folder, "package.json"));
  symlinkSync(join(ROOT, "node_modules"), join(folder, "node_modules"));
  return join(folder, "dist/bin/fairlead.js");
}

export function startAt(binary: string, args: readonly string[]): Started {
  const child = spawn(process.execPath, [binary, ...args], { stdio: ["ignore", "pipe", "pipe"] });
  let [out, err] = ["", ""];
  child.stdout.setEncoding("utf8").on("data", (text: string) => {
    out += text;
  });
  child.stderr.setEncoding("utf8").on("data", (text: string) => {
    err += text;
  });
  const ended = new Promise<Ended>((done) => {
    child.on("close", (status, signal) => done({ status, signal, out, err }));
  });
  return { child, err: () => err, ended };
}

/** Until standard error shows it; throws when the process ends without. */
export async function until(started: Started, shown: RegExp): Promise<void> {
  while (!shown.test(started.err())) {
    if (started.child.exitCode !== null) throw new Error(`ended without ${shown}: ${started.err()}`);
    await new Promise((wait) => setTimeout(wait, 20));
  }
}

export const fairlead = (...args: readonly string[]): Promise<Ended> => start(...args).ended;

export function temporaryFolder(): string {
  return mkdtempSync(join(tmpdir(), "fairlead-test-"));
}

/** Removed at the end of the test that asks for it. */
export function scratch(): string {
  const folder = temporaryFolder();
  onTestFinished(() => rmSync(folder, { recursive: true, force: true }));
  return folder;
}

/** A rover with an easier envelope and a few hundred training steps: it holds after seconds. */
export function quickRover(): string {
  const text = readFileSync(join(ROOT, "configs/orchard-rover.yaml"), "utf8");
  return swapped(text, [
    ["../data/orchard-rover.arrow", join(ROOT, "data/orchard-rover.arrow")],
    ["envelope: [0.6, 2.4]", "envelope: [1.0, 2.2]"],
    ["authority: 0.4", "authority: 0.8"],
    ["steps: 1500", "steps: 200"],
    ["steps: 2500, rounds: 8", "steps: 150, rounds: 2"],
  ]);
}

/** Each piece replaced once; it must be there. */
export function swapped(text: string, swaps: readonly (readonly [string, string])[]): string {
  return swaps.reduce((now, [from, to]) => {
    if (!now.includes(from)) throw new Error(`no '${from}' in the plant file`);
    return now.replace(from, to);
  }, text);
}

/** A plant file in a folder; its path. */
export function plantFile(folder: string, text: string, name = "plant.yaml"): string {
  const path = join(folder, name);
  writeFileSync(path, text);
  return path;
}
