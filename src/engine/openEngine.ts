/**
 * Opens the learning engine: the native backend where @tensorflow/tfjs-node loads, else wasm, else plain JavaScript.
 * Each is held against the float64 code on a probe batch before it is trusted.
 */
import { createRequire } from "node:module";
import { dirname, join, sep } from "node:path";
import type * as Tf from "@tensorflow/tfjs-core";
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

/** Float32 arithmetic on a small network stays well within this of float64. */
const PROBE_TOLERANCE = 1e-4;

const OPENERS: readonly (readonly [EngineName, () => Promise<typeof Tf>])[] = [
  ["native", openNative],
  ["wasm", openWasm],
  ["cpu", openCpu],
];

/** The first engine that loads and agrees. Throws when none does, with the reason of each. */
export async function openEngine(): Promise<Engine> {
  const rejected: { name: EngineName; reason: string }[] = [];
  for (const [name, open] of OPENERS) {
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

async function openNative(): Promise<typeof Tf> {
  // The name is a variable so that a missing optional package is a run-time matter only.
  const name = "@tensorflow/tfjs-node";
  return (await import(name)) as typeof Tf;
}

async function openWasm(): Promise<typeof Tf> {
  const tf = await import("@tensorflow/tfjs-core");
  const wasm = await import("@tensorflow/tfjs-backend-wasm");
  const main = createRequire(import.meta.url).resolve("@tensorflow/tfjs-backend-wasm");
  wasm.setWasmPaths(join(dirname(main), sep));
  wasm.setThreadsCount(1);
  if (!(await tf.setBackend("wasm"))) throw new Error("the wasm backend did not start");
  await tf.ready();
  return tf;
}

async function openCpu(): Promise<typeof Tf> {
  const tf = await import("@tensorflow/tfjs-core");
  await import("@tensorflow/tfjs-backend-cpu");
  if (!(await tf.setBackend("cpu"))) throw new Error("the JavaScript backend did not start");
  await tf.ready();
  return tf;
}

function firstLine(error: unknown): string {
  const text = error instanceof Error ? error.message : String(error);
  return text.split("\n")[0]!.slice(0, 200);
}
