// Nasty files, each with the one thing that is wrong with it, against what a reader must say or bring.
import { mkdirSync, mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import {
  Float16,
  Float64,
  Int8,
  Int64,
  RecordBatch,
  Table,
  tableFromArrays,
  tableToIPC,
  Utf8,
  type Vector,
  vectorFromArray,
} from "apache-arrow";
import { afterAll, describe, expect, it } from "vitest";
import { LogError } from "../../src/logs/logError.js";
import { readTable } from "../../src/logs/readTable.js";

const folder = mkdtempSync(join(tmpdir(), "readers-"));
afterAll(() => rmSync(folder, { recursive: true }));
const at = (name: string): string => join(folder, name);
const WANTED = { numbers: ["time", "speed"], run: "run" };

function write(name: string, content: string | Uint8Array): string {
  writeFileSync(at(name), content);
  return at(name);
}

async function faultOf(path: string): Promise<LogError> {
  const thrown = await readTable(path, WANTED).then(
    () => null,
    (error: unknown) => error,
  );
  expect(thrown).toBeInstanceOf(LogError);
  return thrown as LogError;
}

const HEAD = "run,time,speed";

describe("CSV", () => {
  it.each([
    ["another separator", "run;time;speed\n1;0;2\n", null, /no column 'time', 'speed', 'run'; it has 'run;time;speed'/],
    ["a name twice", `${HEAD},speed\n1,0,2,3\n`, null, /more than one column 'speed'/],
    ["no run label", `${HEAD}\n1,0,2\n,1,2\n`, 3, /no label in column 'run'/],
    ["a decimal comma", `${HEAD}\n1,0,"2,5"\n`, 2, /'2,5' in column 'speed' is not a number/],
    ["text after blank lines", `${HEAD}\n\n1,0,2\n\n1,fast,2\n`, 5, /'fast' in column 'time'/],
    ["a quote left open", `${HEAD}\n1,0,"2\n1,1,2\n`, 3, /not whole CSV/],
    ["a row too long", `${HEAD}\n1,0,2,9\n`, 2, /not whole CSV/],
    ["a row too short", `${HEAD}\n1,0,2\n1,1\n`, 3, /not whole CSV/],
  ])("refuses %s, with the line of the file", async (name, text, row, message) => {
    const path = write(`${name}.csv`, text);
    const fault = await faultOf(path);
    expect(fault.message).toMatch(message);
    expect([fault.file, fault.row]).toEqual([path, row]);
  });
  it("takes columns it does not want in any shape, and any order", async () => {
    const path = write("extra.csv", 'note,speed,run,time\n"two\nlines",2.5e-1,a b,0\n,-3,a b,1\n');
    const { rows, columns, runs } = await readTable(path, WANTED);
    expect([rows, runs]).toEqual([2, ["a b", "a b"]]);
    expect(columns).toEqual(
      new Map([
        ["time", Float64Array.of(0, 1)],
        ["speed", Float64Array.of(0.25, -3)],
      ]),
    );
  });
  it("gives a missing number as NaN and never as zero", async () => {
    const { columns } = await readTable(write("holes.csv", `${HEAD}\n1,0,\n1,1,NaN\n1,2, \n1,3,0\n`), WANTED);
    expect([...columns.get("speed")!]).toEqual([Number.NaN, Number.NaN, Number.NaN, 0]);
  });
  it("holds more rows than its first buffer", async () => {
    const count = 5000;
    const lines = Array.from({ length: count }, (_, k) => `1,${k},${k * k}`);
    const { rows, columns } = await readTable(write("long.csv", `${HEAD}\n${lines.join("\n")}`), WANTED);
    expect(rows).toBe(count);
    expect(columns.get("speed")).toEqual(Float64Array.from({ length: count }, (_, k) => k * k));
  });
  it("refuses a folder and a file that is not there", async () => {
    expect((await faultOf(at("none.csv"))).message).toMatch(/none\.csv: no such file/);
    mkdirSync(at("folder.csv"));
    expect((await faultOf(at("folder.csv"))).message).toMatch(/folder\.csv: is a folder/);
  });
});

describe("Arrow", () => {
  const time = vectorFromArray([0, 1, 2], new Float64());
  // the writer spoils tables whose columns share an array, so every column has its own
  const numbers = vectorFromArray([4, 5, 6], new Float64());
  const run = vectorFromArray(["x", "x", "y"], new Utf8());
  const arrow = (name: string, columns: Readonly<Record<string, Vector>>): string =>
    write(name, tableToIPC(new Table({ ...columns }), "file"));

  it("brings integers of 64 bits, halves and labels that are numbers", async () => {
    const wide = arrow("wide.arrow", { time, speed: vectorFromArray([1n, -2n, null], new Int64()), run });
    expect([...(await readTable(wide, WANTED)).columns.get("speed")!]).toEqual([1, -2, Number.NaN]);
    const half = arrow("half.arrow", {
      time,
      speed: vectorFromArray([1.5, -2.25, 0], new Float16()),
      run: vectorFromArray([7, 7, 8], new Int8()),
    });
    const read = await readTable(half, WANTED);
    expect([...read.columns.get("speed")!]).toEqual([1.5, -2.25, 0]);
    expect(read.runs).toEqual(["7", "7", "8"]);
  });
  it("refuses text and truth values where numbers belong", async () => {
    const text = await faultOf(arrow("text.arrow", { time, speed: vectorFromArray(["4", "5", "6"], new Utf8()), run }));
    expect(text.message).toMatch(/text\.arrow: column 'speed' is of type Utf8; integers and floats are allowed/);
    const flags = await faultOf(arrow("flags.arrow", { time, speed: vectorFromArray([true, false, true]), run }));
    expect(flags.message).toMatch(/'speed' is of type Bool/);
  });
  it("refuses a row without a run label: it is no run called null", async () => {
    const fault = await faultOf(
      arrow("label.arrow", { time, speed: numbers, run: vectorFromArray(["x", null, "y"], new Utf8()) }),
    );
    expect(fault.row).toBe(2);
    expect(fault.message).toMatch(/no label in column 'run'/);
  });
  it("refuses a column that is not there and a table without rows", async () => {
    expect((await faultOf(arrow("few.arrow", { time, run }))).message).toMatch(
      /no column 'speed'; it has 'time', 'run'/,
    );
    const none = tableFromArrays({ time: new Float64Array(), speed: new Float64Array(), run: new Float64Array() });
    expect((await faultOf(write("none.arrow", tableToIPC(none, "file")))).message).toMatch(/holds no rows/);
  });

  const BATCH = 100;
  const batches = [0, 1, 2].map((b) => {
    const numbers = Float64Array.from({ length: BATCH }, (_, k) => b * BATCH + k);
    return tableFromArrays({ time: numbers, speed: numbers.slice(), run: new Int32Array(BATCH) }).batches[0]!;
  });
  const { schema } = batches[0]!;
  const three = new Table(
    schema,
    batches.map((batch) => new RecordBatch(schema, batch.data)),
  );
  const truth = Float64Array.from({ length: 3 * BATCH }, (_, k) => k);

  it("joins the batches of a file in order, and refuses the file cut anywhere", async () => {
    const whole = tableToIPC(three, "file");
    expect((await readTable(write("three.arrow", whole), WANTED)).columns.get("time")).toEqual(truth);
    for (let length = 0; length < whole.length; length += 97) {
      const fault = await faultOf(write("cut.arrow", whole.slice(0, length)));
      expect(fault.message, `${length} bytes`).toMatch(/cut\.arrow: .*(not a whole Arrow|holds no rows)/);
    }
  });
  it("refuses a stream cut within a batch; cut between two, it is a shorter stream by its format", async () => {
    // the Arrow stream format lets a writer end without a mark, and a stream does not know its rows beforehand
    const whole = tableToIPC(three, "stream");
    let refused = 0;
    for (let length = 0; length <= whole.length; length += 8) {
      const path = write("cut.arrows", whole.slice(0, length));
      const rows = await readTable(path, WANTED).then(
        ({ columns }) => {
          const times = columns.get("time")!;
          expect(times).toEqual(truth.slice(0, times.length));
          return times.length;
        },
        (error: unknown) => {
          expect(error).toBeInstanceOf(LogError);
          return null;
        },
      );
      if (rows === null) refused++;
      else expect(rows % BATCH, `${length} bytes`).toBe(0);
    }
    // all cuts but the two that the format allows after each of the three batches
    expect(refused).toBe(whole.length / 8 + 1 - 6);
  });
});

it("chooses the reader by the ending, whatever its case", async () => {
  expect((await readTable(write("UPPER.CSV", `${HEAD}\n1,0,2\n`), WANTED)).rows).toBe(1);
  expect(() => readTable(at("log.txt"), WANTED)).toThrow(/\.csv and \.arrow/);
});
