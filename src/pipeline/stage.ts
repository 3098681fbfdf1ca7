/**
 * A stage of the job: what it reads, what it makes, and how. `runStage` does it unless the manifest shows that the same
 * inputs made the same files before.
 */
import type { Engine } from "../engine/openEngine.js";
import type { Plant } from "../plant/plant.js";
import { type Manifest, type RunFolder, RunFolderError, sha256 } from "./runFolder.js";
import { FAIRLEAD_VERSION } from "./version.js";

export type StageName =
  | "drift"
  | "change"
  | "intake"
  | "residual"
  | "bound"
  | "analytic"
  | "metric"
  | "certify"
  | "report";

export interface StageContext {
  readonly folder: RunFolder;
  readonly plant: Plant;
  /** As read, for the manifest and the copy in the run folder. */
  readonly plantText: string;
  readonly plantPath: string;
  readonly runtime: string;
  readonly seed: number;
  /** Opens the learning engine on first use. */
  readonly engine: () => Promise<Engine>;
  readonly progress: (stage: StageName, done: number, total: number, note: string) => void;
  readonly signal: AbortSignal;
  /** The run that this one refits; null for a run of its own. */
  readonly parent: ParentRun | null;
  /** Hash of the tool's own code. */
  readonly code: string;
  /** Worker threads for proofs; the outcome is the same for any number. */
  readonly workers: number;
}

export interface ParentRun {
  readonly folder: RunFolder;
  /** As written down in the manifest: its path, and a hash over what its stages made. */
  readonly path: string;
  readonly digest: string;
}

export interface Stage {
  readonly name: StageName;
  /** One line for people. */
  readonly title: string;
  /** Artifacts of earlier stages. */
  readonly reads: readonly string[];
  readonly makes: readonly string[];
  /** Learning stages depend on the engine. */
  readonly learns: boolean;
  /** Files outside the run folder that it reads. */
  readonly sources?: (context: StageContext) => Readonly<Record<string, string>>;
  /** Does it; returns a few words on the outcome for people. */
  readonly run: (context: StageContext) => Promise<string>;
}

export interface StageOutcome {
  readonly name: StageName;
  readonly reused: boolean;
  readonly seconds: number;
  readonly note: string;
}

export async function runStage(stage: Stage, context: StageContext, force: boolean): Promise<StageOutcome> {
  const { folder } = context;
  const missing = stage.reads.find((name) => !folder.has(name));
  if (missing !== undefined) {
    throw new RunFolderError(
      `${folder.file(missing)}: missing; the stage '${stage.name}' needs it: run the stages before it first`,
    );
  }
  const engine = stage.learns ? await context.engine() : null;
  const sources = stage.sources?.(context) ?? {};
  const inputs = sha256(
    JSON.stringify([
      stage.name,
      context.code,
      context.seed,
      sha256(context.plantText),
      engine === null ? null : [engine.name, engine.version],
      context.parent?.digest ?? null,
      sources,
      stage.reads.map((name) => folder.hash(name)),
    ]),
  );
  const before = folder.manifest();
  const record = before?.stages[stage.name];
  const isAsRecorded = (name: string): boolean =>
    (folder.has(name) ? folder.hash(name) : undefined) === record?.files[name];
  if (!force && record !== undefined && record.inputs === inputs && stage.makes.every(isAsRecorded)) {
    return { name: stage.name, reused: true, seconds: record.seconds, note: "" };
  }
  const manifestWith = (stages: Manifest["stages"]): Manifest => ({
    format: 1,
    tool: { name: "fairlead", version: FAIRLEAD_VERSION, code: context.code },
    runtime: context.runtime,
    plantPath: context.plantPath,
    inputs: { ...before?.inputs, ...sources, plant: sha256(context.plantText) },
    seed: context.seed,
    parent: context.parent === null ? null : { path: context.parent.path, digest: context.parent.digest },
    engine: engine === null ? (before?.engine ?? null) : { name: engine.name, version: engine.version },
    stages,
  });
  // a folder whose very first stage is killed is a run folder all the same
  if (before === null) folder.writeManifest(manifestWith({}));
  for (const name of stage.makes) folder.remove(name);
  const from = performance.now();
  const note = await stage.run(context);
  const seconds = (performance.now() - from) / 1000;
  const files = Object.fromEntries(
    stage.makes.filter((name) => folder.has(name)).map((name) => [name, folder.hash(name)]),
  );
  folder.writeManifest(manifestWith({ ...before?.stages, [stage.name]: { inputs, files, seconds } }));
  return { name: stage.name, reused: false, seconds, note };
}
