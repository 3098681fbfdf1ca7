/** Arrow IPC, file or stream, by apache-arrow: any number type, nulls as missing values (NaN), run labels of any type. */
import { readFile } from "node:fs/promises";
import { DataType, type Table, type Vector } from "apache-arrow";
import { arrowTable } from "./arrowTable.js";
import { LogError } from "./logError.js";
import { type LogTable, requireColumns, runLabel, type WantedColumns } from "./logTable.js";

export async function readArrow(file: string, wanted: WantedColumns): Promise<LogTable> {
  let table: Table;
  try {
    table = arrowTable(await readFile(file));
  } catch (error) {
    const isMissing = (error as NodeJS.ErrnoException).code === "ENOENT";
    const reason = isMissing
      ? "no such file"
      : `is not a whole Arrow IPC file or stream (${String((error as Error).message).split("\n")[0]})`;
    throw new LogError(file, null, `${reason}; logs.files of the plant file names the logs, relative to it`);
  }
  const rows = table.numRows;
  if (rows === 0) throw new LogError(file, null, "holds no rows (empty, or cut off before the first record batch)");
  requireColumns(
    file,
    table.schema.fields.map((field) => field.name),
    wanted,
  );
  try {
    return {
      file,
      rows,
      columns: new Map(wanted.numbers.map((name) => [name, numbers(file, name, table.getChild(name)!, rows)])),
      runs: wanted.run === null ? null : labels(file, wanted.run, table.getChild(wanted.run)!, rows),
    };
  } catch (error) {
    if (error instanceof LogError) throw error;
    throw new LogError(
      file,
      null,
      `holds values that cannot be read (${String((error as Error).message)}); write it again`,
    );
  }
}

function numbers(file: string, name: string, vector: Vector, rows: number): Float64Array {
  const { type } = vector;
  if (!DataType.isFloat(type) && !DataType.isInt(type)) {
    throw new LogError(file, null, `column '${name}' is of type ${String(type)}; integers and floats are allowed`);
  }
  const out = new Float64Array(rows);
  for (let k = 0; k < rows; k++) {
    const value = vector.get(k) as number | bigint | null;
    out[k] = value === null ? Number.NaN : Number(value);
  }
  return out;
}

function labels(file: string, name: string, vector: Vector, rows: number): string[] {
  return Array.from({ length: rows }, (_, k) => runLabel(file, k + 1, name, String(vector.get(k) ?? "")));
}
