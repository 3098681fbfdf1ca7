/** `fairlead doctor`: which engine runs, versions, and a self-check against closed forms. */
import { availableParallelism, totalmem } from "node:os";
import { openEngine } from "../engine/openEngine.js";
import { selfCheck } from "../pipeline/selfCheck.js";
import { FAIRLEAD_VERSION } from "../pipeline/version.js";
import type { ExitStatus, Streams } from "./contract.js";

export async function doctor(options: { json: boolean }, streams: Streams): Promise<ExitStatus> {
  const engine = await openEngine();
  const checks = selfCheck();
  const report = {
    fairlead: FAIRLEAD_VERSION,
    node: process.version,
    platform: `${process.platform} ${process.arch}`,
    processors: availableParallelism(),
    memoryGiB: Math.round(totalmem() / 2 ** 30),
    engine: { name: engine.name, version: engine.version, probe: engine.probe, rejected: engine.rejected },
    checks,
  };
  const healthy = checks.every((check) => check.passed);
  if (options.json) streams.out.write(`${JSON.stringify(report, null, 1)}\n`);
  else {
    const { relativeError, tolerance } = engine.probe;
    const lines = [
      `fairlead ${report.fairlead} on node ${report.node}, ${report.platform}, ${report.processors} processors, ${report.memoryGiB} GiB`,
      `learning engine: ${engine.name} (tfjs ${engine.version}), off the float64 code by ${relativeError.toExponential(1)} (allowed ${tolerance.toExponential(0)})`,
      ...engine.rejected.map((other) => `not used: ${other.name}: ${other.reason}`),
      ...checks.map(
        (check) => `${check.passed ? "pass" : "FAIL"}  ${check.name}: ${check.found} (expected ${check.expected})`,
      ),
    ];
    streams.out.write(`${lines.join("\n")}\n`);
  }
  return healthy ? 0 : 1;
}
