// Tables of the run folder: what is written is what is read.
import { join } from "node:path";
import { describe, expect, it } from "vitest";
import type { Run } from "../../src/logs/recording.js";
import { readSavedTable, writeTable } from "../../src/logs/savedTable.js";
import { seededRandom } from "../../src/num/random.js";
import { boxesColumns, boxesFromColumns } from "../../src/pipeline/boxesTable.js";
import { samplesColumns, splitFromColumns } from "../../src/pipeline/samplesTable.js";
import type { LeafTable } from "../../src/verify/proof/leafTable.js";
import { scratch } from "../cli/binary.js";
import { ROVER } from "../plant/examples.js";
import { plantOf } from "../plant/reading.js";

const PLANT = plantOf(ROVER);
const random = seededRandom(4);
const draws = (count: number): Float64Array => Float64Array.from({ length: count }, () => random.normal());

function runOf(id: string, file: string, lengths: readonly number[]): Run {
  const pieces = lengths.map((length) => ({
    time: Float64Array.from({ length }, (_, k) => k / 10),
    states: draws(4 * length),
    inputs: draws(2 * length),
  }));
  return { id, file, pieces };
}

describe("samples.arrow", () => {
  it("gives every run back with its part, pieces and bits", () => {
    // the same name in two files and in neighbouring rows: still two runs
    const split = {
      fit: [runOf("1", "a.csv", [3, 5]), runOf("1", "b.csv", [4]), runOf("2", "b.csv", [2, 2, 7])],
      calibration: [runOf('ä, "x"\n', "a.csv", [6])],
      test: [] as Run[],
    };
    const path = join(scratch(), "samples.arrow");
    writeTable(path, samplesColumns(PLANT, split), {});
    expect(splitFromColumns(PLANT, readSavedTable(path))).toEqual(split);
  });
});

describe("boxes.arrow", () => {
  const [count, spreads, pushes] = [5, 7, 4];
  const claims = {
    pushes: Array.from({ length: pushes }, () => ({ wbar: [1, 0, 0, 0], most: 1 })),
    spreads: Array.from({ length: spreads }, () => ({ direction: { kind: "planar" as const }, most: 1 })),
  };
  const table: LeafTable = {
    dimension: 1,
    count,
    lower: draws(count),
    upper: draws(count),
    status: Uint8Array.of(0, 1, 2, 1, 1),
    claim: Uint8Array.of(1, 0, 5, 0, 0),
    rate: Float64Array.of(Number.NEGATIVE_INFINITY, 1, 2, 0.1 + 0.2, 5e-324),
    pushes: draws(count * pushes),
    spreads: draws(count * spreads),
    authority: Float64Array.of(Number.POSITIVE_INFINITY, 1, 2, 3, 4),
  };

  it("gives every box back with its bits", () => {
    const path = join(scratch(), "boxes.arrow");
    writeTable(path, boxesColumns(PLANT, table), {});
    expect(boxesFromColumns(PLANT, readSavedTable(path), claims)).toEqual(table);
  });

  it("names the column that is missing", () => {
    const columns = new Map(boxesColumns(PLANT, table).map(({ name, values }) => [name, values]));
    for (const name of ["rate", "push 3", "spread 6", "speed.lower"]) {
      const cut = new Map(columns);
      cut.delete(name);
      expect(() => boxesFromColumns(PLANT, cut, claims)).toThrow(`'${name}'`);
    }
  });
});
