import { readdirSync, readFileSync } from "node:fs";
import { dirname, join, relative, resolve } from "node:path";
import { describe, expect, it } from "vitest";

/** Imports point only to a layer above (an earlier entry), never below or beside; type imports count. */
const LAYERS: readonly (readonly string[])[] = [
  ["num"],
  ["plant"],
  ["nets"],
  ["model"],
  ["logs"],
  ["engine"],
  ["residual", "metric", "verify", "tube", "baseline", "track"],
  ["report"],
  ["pipeline"],
  ["cli"],
];
const SOURCE = resolve(import.meta.dirname, "../../src");
const rank = new Map(LAYERS.flatMap((layer, i) => layer.map((name) => [name, i] as const)));

const files = readdirSync(SOURCE, { recursive: true, encoding: "utf8" }).filter((name) => name.endsWith(".ts"));
const imports = files.flatMap((file) =>
  [...readFileSync(join(SOURCE, file), "utf8").matchAll(/(?:from|import)\s*\(?\s*"([^"]+)"/g)].map((match) => ({
    file,
    target: match[1]!,
  })),
);
const layerOf = (file: string): string => file.split(/[\\/]/)[0]!;

describe("layers", () => {
  it("has no folder outside the list", () => {
    for (const file of files) expect(rank.has(layerOf(file)), file).toBe(true);
  });
  it("imports only from above", () => {
    const wrong = imports
      .filter(({ target }) => target.startsWith("."))
      .map(({ file, target }) => ({ file, to: relative(SOURCE, resolve(SOURCE, dirname(file), target)) }))
      .filter(({ file, to }) => layerOf(file) !== layerOf(to) && !(rank.get(layerOf(to))! < rank.get(layerOf(file))!));
    expect(wrong).toEqual([]);
  });
  const only = (pattern: RegExp, allowed: readonly string[]): void => {
    const wrong = imports.filter(({ file, target }) => pattern.test(target) && !allowed.includes(layerOf(file)));
    expect(wrong).toEqual([]);
  };
  it("keeps TensorFlow.js in the learning stages", () => only(/^@tensorflow\//, ["engine", "residual", "metric"]));
  it("keeps Arrow in logs and the run folder", () => only(/^apache-arrow/, ["logs", "pipeline"]));
  it("keeps the learner out of the verifier", () => {
    const wrong = imports.filter(
      ({ file, target }) => layerOf(file) === "verify" && /\/(engine|metric|residual)\//.test(target),
    );
    expect(wrong).toEqual([]);
  });
  it("keeps process, console and arguments in the command line", () => {
    const wrong = files
      .filter((file) => layerOf(file) !== "cli")
      .filter((file) => /\bprocess\.|\bconsole\./.test(readFileSync(join(SOURCE, file), "utf8")));
    expect(wrong).toEqual([]);
  });
  it("keeps files under 400 lines", () => {
    const long = files.filter(
      (file) => !/Wasm\.ts$/.test(file) && readFileSync(join(SOURCE, file), "utf8").split("\n").length > 400,
    );
    expect(long).toEqual([]);
  });
});
