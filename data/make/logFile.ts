/**
 * One data set as an Arrow IPC file: float32 columns with their unit in the field's metadata, a row a sample, a run
 * after the other.
 */
import { Field, Float32, Int16, makeData, RecordBatch, Schema, Struct, Table, tableToIPC } from "apache-arrow";
import { seededRandom } from "../../src/num/random.js";
import type { DataSet } from "./dataSets.js";
import { simulateRun } from "./simulate.js";

export function logFile(set: DataSet): Uint8Array {
  const { states, inputs } = set.truth;
  const random = seededRandom(set.seed);
  const runs = Array.from({ length: set.runs }, (_, r) =>
    simulateRun(set.truth, set.seconds, random.stream(`run ${r}`), r),
  );
  const rows = runs.reduce((sum, run) => sum + run.time.length, 0);
  const gather = (of: (run: number, k: number) => number): Float32Array => {
    const out = new Float32Array(rows);
    let at = 0;
    runs.forEach((run, r) => {
      for (let k = 0; k < run.time.length; k++) out[at++] = of(r, k);
    });
    return out;
  };
  const [n, m] = [states.length, inputs.length];
  const columns = [
    { name: "time", unit: "s", values: gather((r, k) => runs[r]!.time[k]!) },
    ...states.map(({ name, unit }, i) => ({ name, unit, values: gather((r, k) => runs[r]!.measured[k * n + i]!) })),
    ...inputs.map(({ name, unit }, j) => ({ name, unit, values: gather((r, k) => runs[r]!.inputs[k * m + j]!) })),
  ];
  const runColumn = Int16Array.from(gather((r) => r + 1));
  const fields = [
    new Field("run", new Int16(), false),
    ...columns.map(({ name, unit }) => new Field(name, new Float32(), false, new Map([["unit", unit]]))),
  ];
  const schema = new Schema(fields, new Map([["origin", "invented; made by data/make of the Fairlead project"]]));
  const children = [
    makeData({ type: new Int16(), length: rows, nullCount: 0, data: runColumn }),
    ...columns.map(({ values }) => makeData({ type: new Float32(), length: rows, nullCount: 0, data: values })),
  ];
  const data = makeData({ type: new Struct(fields), length: rows, nullCount: 0, children });
  return tableToIPC(new Table(schema, [new RecordBatch(schema, data)]), "file");
}
