/** Arrow tables of the run folder: columns with their unit in the field's metadata, written whole or not at all. */
import { closeSync, fsyncSync, openSync, readFileSync, renameSync, writeFileSync } from "node:fs";
import {
  Field,
  Float64,
  makeData,
  RecordBatch,
  Schema,
  Struct,
  Table,
  tableToIPC,
  Utf8,
  vectorFromArray,
} from "apache-arrow";
import { arrowTable } from "./arrowTable.js";
import { LogError } from "./logError.js";

export interface SavedColumn {
  readonly name: string;
  readonly unit: string;
  readonly values: Float64Array | readonly string[];
}

/** Writes an Arrow IPC file; `facts` go to the table's metadata. The bytes depend on the values alone. */
export function writeTable(
  path: string,
  columns: readonly SavedColumn[],
  facts: Readonly<Record<string, string>>,
): void {
  const fields = columns.map(
    ({ name, unit, values }) =>
      new Field(name, values instanceof Float64Array ? new Float64() : new Utf8(), false, new Map([["unit", unit]])),
  );
  const schema = new Schema(fields, new Map(Object.entries(facts)));
  const children = columns.map(({ values }) =>
    values instanceof Float64Array
      ? // a copy: columns that share one array would be written in a way that does not read back
        makeData({ type: new Float64(), data: values.slice() })
      : (vectorFromArray([...values], new Utf8()).data[0] ?? makeData({ type: new Utf8() })),
  );
  const length = columns[0]?.values.length ?? 0;
  const data = makeData({ type: new Struct(fields), length, nullCount: 0, children });
  const bytes = tableToIPC(new Table(schema, [new RecordBatch(schema, data)]), "file");
  const temporary = `${path}.part`;
  const handle = openSync(temporary, "w");
  try {
    writeFileSync(handle, bytes);
    fsyncSync(handle);
  } finally {
    closeSync(handle);
  }
  renameSync(temporary, path);
}

export function readSavedTable(path: string): Map<string, Float64Array | readonly string[]> {
  let table: Table;
  try {
    table = arrowTable(readFileSync(path));
  } catch {
    throw new LogError(path, null, "is not a whole table; run the stage that makes it again");
  }
  return new Map(
    table.schema.fields.map((field) => {
      const vector = table.getChild(field.name)!;
      const values = Array.from({ length: table.numRows }, (_, k) => vector.get(k) as number | string);
      return [field.name, typeof values[0] === "string" ? (values as string[]) : Float64Array.from(values as number[])];
    }),
  );
}
