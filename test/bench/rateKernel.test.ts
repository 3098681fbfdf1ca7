// States a second of the rate kernel, n = 6, m = 2, 3 network inputs, width 32, one core, side by side with a batched
// float64 PyTorch program of the same work, when FAIRLEAD_PEER_RATE names one (it prints JSON with statesPerSecond for
// --batch and --threads). The record keeps both and their ratio.
import { execFileSync } from "node:child_process";
import { writeFileSync } from "node:fs";
import { cpus } from "node:os";
import { resolve } from "node:path";
import { expect, it } from "vitest";
import { seededRandom } from "../../src/num/random.js";
import { inputCorners } from "../../src/verify/corners.js";
import { rateKernel } from "../../src/verify/kernel/rateKernel.js";
import { randomMlp } from "../support/randomSystem.js";

const TARGET = 3;
const peer = process.env.FAIRLEAD_PEER_RATE;

function ours(capacity: number): number {
  const random = seededRandom(1);
  const [n, m, inputs, width] = [6, 2, 3, 32];
  const corners = inputCorners(m);
  const kernel = rateKernel({ n, m, w0: 0.05, mlp: randomMlp(random, [inputs, width, width, 21]), corners }, capacity);
  const draw = (size: number): Float64Array => Float64Array.from({ length: size }, () => random.normal());
  for (let at = 0; at < capacity; at++) {
    const A = draw(corners.length * n * n).map((value, e) => 0.5 * value - ((e % (n * n)) % (n + 1) === 0 ? 1 : 0));
    kernel.set(at, draw(inputs), draw((m + 1) * inputs), A, orthonormal(draw(n * (n - m)), n, n - m));
  }
  const seconds = Array.from({ length: 42 }, () => {
    const from = performance.now();
    kernel.run(capacity);
    return (performance.now() - from) / 1000;
  });
  expect(kernel.run(capacity).every(Number.isFinite)).toBe(true);
  const median = seconds.slice(2).sort((a, b) => a - b)[20]!;
  return capacity / median;
}

/** Gram-Schmidt on the columns. */
function orthonormal(X: Float64Array, n: number, k: number): Float64Array {
  for (let j = 0; j < k; j++) {
    for (let l = 0; l < j; l++) {
      let dot = 0;
      for (let i = 0; i < n; i++) dot += X[i * k + j]! * X[i * k + l]!;
      for (let i = 0; i < n; i++) X[i * k + j]! -= dot * X[i * k + l]!;
    }
    let square = 0;
    for (let i = 0; i < n; i++) square += X[i * k + j]! ** 2;
    for (let i = 0; i < n; i++) X[i * k + j]! /= Math.sqrt(square);
  }
  return X;
}

it("reaches three times the states a second of the peer", () => {
  const batches = [256, 1024, 4096];
  const rounds = Array.from({ length: 3 }, () => ({
    ours: Math.max(...batches.map(ours)),
    peer:
      peer === undefined
        ? null
        : Math.max(
            ...batches.map((batch) => {
              const args = [peer, "--batch", String(batch), "--threads", "1"];
              const line = execFileSync("python3", args, {
                encoding: "utf8",
                env: { ...process.env, PATH: `/usr/bin:${process.env.PATH}` },
              });
              return (JSON.parse(line) as { statesPerSecond: number }).statesPerSecond;
            }),
          ),
  }));
  const middle = (values: readonly number[]): number => [...values].sort((a, b) => a - b)[values.length >> 1]!;
  const ratios = rounds.flatMap((round) => (round.peer === null ? [] : [round.ours / round.peer]));
  const record = {
    processor: cpus()[0]?.model,
    node: process.version,
    rounds,
    medianRatio: ratios.length === 0 ? null : middle(ratios),
    target: TARGET,
  };
  if (ratios.length > 0) {
    writeFileSync(resolve(import.meta.dirname, "rateKernel.json"), `${JSON.stringify(record, null, 2)}\n`);
    expect(middle(ratios)).toBeGreaterThan(TARGET);
  }
  expect(middle(rounds.map((round) => round.ours))).toBeGreaterThan(50_000);
});
