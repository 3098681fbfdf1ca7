/**
 * Opens the learning engine: the native backend where @tensorflow/tfjs-node loads, else wasm, else plain JavaScript.
 * Each is held against the float64 code on a probe batch before it is trusted.
 */
import { createRequire } from "node:module";
import { dirname, join, sep } from "node:path";
import type * as Tf from "@tensorflow/tfjs-core";
import { registerGradients } from "./gradients.js";
import { probeEngine } from "./probeEngine.js";

export type EngineName = "native" | "wasm" | "cpu";

export interface Engine {
  readonly name: EngineName;
  /** Version of tfjs. */
  readonly version: string;
  readonly probe: { readonly relativeError: number; readonly tolerance: number };
  readonly rejected: readonly { readonly name: EngineName; readonly reason: string }[];
  readonly tf: typeof Tf;
}

export interface EngineCandidate {
  readonly name: EngineName;
  /** Makes it the current backend; throws when it cannot be loaded. */
  readonly open: () => Promise<typeof Tf>;
}

/** Float32 arithmetic on a small network stays well within this of float64: 1.3e-7 was measured on wasm. */
const PROBE_TOLERANCE = 1e-4;

/** In order of speed. */
export const ENGINE_CANDIDATES: readonly EngineCandidate[] = [
  { name: "native", open: openNative },
  { name: "wasm", open: openWasm },
  { name: "cpu", open: openCpu },
];

/** The first candidate that loads and agrees. Throws when none does, with the reason of each. */
export async function openEngine(candidates: readonly EngineCandidate[] = ENGINE_CANDIDATES): Promise<Engine> {
  const rejected: { name: EngineName; reason: string }[] = [];
  for (const { name, open } of candidates) {
    try {
      const tf = await open();
      const relativeError = probeEngine(tf);
      if (relativeError <= PROBE_TOLERANCE) {
        return { name, version: tf.version_core, probe: { relativeError, tolerance: PROBE_TOLERANCE }, rejected, tf };
      }
      rejected.push({ name, reason: `off the float64 code by ${relativeError.toExponential(1)}` });
    } catch (error) {
      rejected.push({ name, reason: firstLine(error) });
    }
  }
  const reasons = rejected.map(({ name, reason }) => `${name}: ${reason}`).join("; ");
  throw new Error(`no learning engine can be used (${reasons}); install the project's packages again with 'npm ci'`);
}

const requireHere = createRequire(import.meta.url);

async function openNative(): Promise<typeof Tf> {
  // The package is optional: absent it throws "cannot find module", half-installed an error of its own.
  const tf = requireHere("@tensorflow/tfjs-node") as typeof Tf;
  await use(tf, "tensorflow");
  return tf;
}

async function openWasm(): Promise<typeof Tf> {
  const tf = await import("@tensorflow/tfjs-core");
  const wasm = await import("@tensorflow/tfjs-backend-wasm");
  wasm.setWasmPaths(join(dirname(requireHere.resolve("@tensorflow/tfjs-backend-wasm")), sep));
  wasm.setThreadsCount(1); // one thread sums in one order
  await use(tf, "wasm");
  registerGradients(tf);
  return tf;
}

async function openCpu(): Promise<typeof Tf> {
  const tf = await import("@tensorflow/tfjs-core");
  await import("@tensorflow/tfjs-backend-cpu");
  await use(tf, "cpu");
  // The backend advertises the native package at its first use; `doctor` says which engine runs.
  (tf.backend() as object as { firstUse: boolean }).firstUse = false;
  registerGradients(tf);
  return tf;
}

async function use(tf: typeof Tf, backend: string): Promise<void> {
  if (!(await tf.setBackend(backend))) throw new Error(`the backend '${backend}' did not start`);
  await tf.ready();
}

function firstLine(error: unknown): string {
  const text = error instanceof Error ? error.message : String(error);
  return text.split("\n")[0]!.trim().slice(0, 200);
}
