/** `fairlead run` and the single stages: read the plant file, run the job, print the verdict. */
import { readFileSync } from "node:fs";
import { availableParallelism } from "node:os";
import { basename, extname, join, resolve } from "node:path";
import { FILES } from "../pipeline/artifacts.js";
import { type JobOutcome, runJob, runOneStage } from "../pipeline/job.js";
import { lineageOf } from "../pipeline/lineage.js";
import { PLAN_FILES, runPlan } from "../pipeline/planRun.js";
import { recheckRun } from "../pipeline/recheckRun.js";
import { runRefit } from "../pipeline/refit.js";
import { type Manifest, openResultFolder, openRunFolder, type RunFolder, runDigest } from "../pipeline/runFolder.js";
import type { ParentRun, Stage, StageOutcome } from "../pipeline/stage.js";
import { codeHash } from "../pipeline/version.js";
import type { Plant } from "../plant/plant.js";
import { formatProblems, readPlant } from "../plant/readPlant.js";
import { summaryTable } from "../report/summaryTable.js";
import type { ExitStatus, RefitOptions, RunOptions, Streams } from "./contract.js";
import { InputError } from "./inputError.js";
import { silentProgress, terminalProgress } from "./progress.js";

interface LoadedPlant {
  readonly plant: Plant;
  readonly text: string;
  readonly path: string;
}

export async function runCommand(
  path: string,
  options: RunOptions,
  streams: Streams,
  signal: AbortSignal,
): Promise<ExitStatus> {
  const loaded = loadPlant(resolve(path));
  const folder = openRunFolder(resolve(options.out), true);
  const progress = options.quiet ? silentProgress : terminalProgress(streams.err);
  const say = options.quiet ? () => undefined : (text: string) => void streams.err.write(text);
  const outcome = await runJob({
    ...job(loaded, folder, options, signal),
    progress: progress.update,
    finished: (stage) => {
      progress.settle();
      say(stageLine(stage));
    },
  });
  progress.settle();
  return conclude(outcome, options, streams, folder);
}

/** `fairlead refit DIR --logs NEW... --out DIR2`. */
export async function refitCommand(
  dir: string,
  options: RefitOptions,
  streams: Streams,
  signal: AbortSignal,
): Promise<ExitStatus> {
  const { loaded, manifest } = openRun(dir);
  const files = options.logs.map((path) => resolve(path));
  const folder = openRunFolder(resolve(options.out), true);
  if (folder.path === resolve(dir)) throw new InputError(`--out: given the earlier run folder ${dir}; give a new one`);
  const progress = options.quiet ? silentProgress : terminalProgress(streams.err);
  const change = await runRefit({
    ...job(loaded, folder, { seed: options.seed ?? manifest.seed }, signal),
    plant: { ...loaded.plant, logs: { ...loaded.plant.logs, files } },
    parent: parentRun(resolve(dir)),
    isForced: options.always,
    progress: progress.update,
    finished: (stage) => {
      progress.settle();
      if (!options.quiet) streams.err.write(stageLine(stage));
    },
  });
  progress.settle();
  if (options.json) streams.out.write(`${JSON.stringify(change, null, 1)}\n`);
  streams.err.write(`\n${change.drift.join("\n")}\n`);
  if (change.refit === null) {
    streams.err.write(`nothing was refitted; --always refits all the same\npage: ${folder.file(FILES.changePage)}\n`);
    return 0;
  }
  const status = conclude({ summary: folder.readJson(FILES.summary) }, { ...options, json: false }, streams, folder);
  streams.err.write(`${change.refit.planner.text}\npage: ${folder.file(FILES.changePage)}\n`);
  return status;
}

/** `fairlead path DIR PLAN`. */
export async function pathCommand(
  dir: string,
  plan: string,
  options: { json: boolean; quiet: boolean; out?: string; law: "fixed" | "plan" },
  streams: Streams,
  signal: AbortSignal,
): Promise<ExitStatus> {
  const { folder, loaded } = openRun(dir);
  const out = openResultFolder(resolve(options.out ?? join(dir, `path-${basename(plan, extname(plan))}`)));
  const progress = options.quiet ? silentProgress : terminalProgress(streams.err);
  const summary = await runPlan({
    folder,
    plant: loaded.plant,
    planPath: resolve(plan),
    law: options.law,
    out,
    progress: (done, total, note) => progress.update("path", done, total, note),
    signal,
  });
  progress.settle();
  if (options.json) streams.out.write(`${JSON.stringify(summary, null, 1)}\n`);
  streams.err.write(`${[summary.text, ...summary.problems].join("\n")}\npage: ${out.file(PLAN_FILES.page)}\n`);
  return { whole: 0, ends: 3, refused: 2 }[summary.status] as ExitStatus;
}

/** `fairlead lineage DIR`: the run, the run that it refits, and so on. */
export function lineageCommand(dir: string, options: { json: boolean }, streams: Streams): ExitStatus {
  const lineage = lineageOf(openRunFolder(resolve(dir), false));
  if (options.json) streams.out.write(`${JSON.stringify(lineage, null, 1)}\n`);
  else streams.out.write(`${lineage.map(({ path, text }) => `${path}\n  ${text}`).join("\n")}\n`);
  return 0;
}

function parentRun(path: string): ParentRun {
  const { folder, manifest } = openRun(path);
  return { folder, path: folder.path, digest: runDigest(manifest) };
}

/** `fairlead recheck DIR`. */
export function recheckCommand(dir: string, options: { json: boolean; quiet: boolean }, streams: Streams): ExitStatus {
  const { folder, loaded } = openRun(dir);
  const progress = options.quiet ? silentProgress : terminalProgress(streams.err);
  const result = recheckRun(folder, loaded.plant, (done, total, note) => progress.update("recheck", done, total, note));
  progress.settle();
  if (options.json) streams.out.write(`${JSON.stringify(result, null, 1)}\n`);
  const words = result.holds
    ? `the certificate holds: ${result.boxes} boxes tile the envelope and each passes`
    : `the certificate does not hold as saved:\n${result.faults.map((fault) => `  ${fault}`).join("\n")}`;
  streams.err.write(`${words}\n`);
  return result.holds ? 0 : 3;
}

function openRun(dir: string): { folder: RunFolder; manifest: Manifest; loaded: LoadedPlant } {
  const folder = openRunFolder(resolve(dir), false);
  const manifest = folder.manifest();
  if (manifest === null)
    throw new InputError(`${dir}: an empty folder; make a run folder with 'fairlead run PLANT.yaml --out ${dir}'`);
  return { folder, manifest, loaded: parsePlant(folder.readText(FILES.plant), manifest.plantPath) };
}

export async function stageCommand(
  stage: Stage,
  dir: string,
  options: Omit<RunOptions, "out">,
  streams: Streams,
  signal: AbortSignal,
): Promise<ExitStatus> {
  const { folder, manifest, loaded } = openRun(dir);
  const progress = options.quiet ? silentProgress : terminalProgress(streams.err);
  const outcome = await runOneStage(stage, {
    ...job(loaded, folder, { seed: manifest.seed }, signal),
    parent: manifest.parent === null ? null : parentRun(manifest.parent.path),
    progress: progress.update,
    finished: () => progress.settle(),
  });
  progress.settle();
  if (!options.quiet) streams.err.write(stageLine(outcome));
  if (options.json)
    streams.out.write(`${JSON.stringify({ stage: stage.name, files: stage.makes, seconds: outcome.seconds })}\n`);
  return 0;
}

function job(loaded: LoadedPlant, folder: RunFolder, options: { seed?: number | undefined }, signal: AbortSignal) {
  return {
    plant: loaded.plant,
    plantText: loaded.text,
    plantPath: loaded.path,
    folder,
    seed: options.seed ?? loaded.plant.settings.seed,
    runtime: `node ${process.version}`,
    parent: null as ParentRun | null,
    code: codeHash(),
    workers: availableParallelism(),
    signal,
  };
}

function loadPlant(path: string): LoadedPlant {
  let text: string;
  try {
    text = readFileSync(path, "utf8");
  } catch (error) {
    const reason = (error as NodeJS.ErrnoException).code === "ENOENT" ? "no such file" : "cannot be read";
    throw new InputError(
      `${path}: ${reason}; give the path of a plant file (YAML), such as configs/orchard-rover.yaml`,
    );
  }
  return parsePlant(text, path);
}

function parsePlant(text: string, path: string): LoadedPlant {
  const result = readPlant(text, path);
  if (!result.ok) throw new InputError(formatProblems(path, result.problems));
  return { plant: result.plant, text, path };
}

function stageLine(stage: StageOutcome): string {
  const time = stage.reused ? "kept from before" : `${stage.seconds.toFixed(1)} s`;
  return `  ${stage.name.padEnd(9)} ${time}${stage.note === "" ? "" : `  ${stage.note}`}\n`;
}

function conclude({ summary }: JobOutcome, options: RunOptions, streams: Streams, folder: RunFolder): ExitStatus {
  if (options.json) streams.out.write(`${JSON.stringify(summary, null, 1)}\n`);
  streams.err.write(
    `\n${summaryTable(summary, { width: streams.err.columns ?? 100, color: streams.err.isTTY === true })}\n`,
  );
  streams.err.write(`report: ${folder.file("report.html")}\n`);
  return summary.verdict.holds ? 0 : 3;
}
