/** A log as read: numbers by column, run labels as text, rows in file order. What every container reader gives. */
import { LogError } from "./logError.js";

export interface LogTable {
  readonly file: string;
  readonly rows: number;
  readonly columns: ReadonlyMap<string, Float64Array>;
  /** Run label of each row; null when the file is one run. */
  readonly runs: readonly string[] | null;
}

/** The columns that a reader must bring: all numbers but the run label. */
export interface WantedColumns {
  readonly numbers: readonly string[];
  readonly run: string | null;
}

export function requireColumns(file: string, present: readonly string[], wanted: WantedColumns): void {
  const all = [...wanted.numbers, ...(wanted.run === null ? [] : [wanted.run])];
  const missing = all.filter((name) => !present.includes(name));
  const doubled = all.filter((name) => present.indexOf(name) !== present.lastIndexOf(name));
  if (doubled.length > 0) {
    const names = doubled.map((name) => `'${name}'`).join(", ");
    throw new LogError(file, null, `has more than one column ${names}; a name that is read may stand once`);
  }
  if (missing.length === 0) return;
  throw new LogError(
    file,
    null,
    `has no column ${missing.map((name) => `'${name}'`).join(", ")}; it has ${present.map((name) => `'${name}'`).join(", ")}. ` +
      "Name the right ones under logs.columns, logs.time or logs.run of the plant file",
  );
}

/** Rows without a label belong to no run that is known: taken together they would pass for one recording. */
export function runLabel(file: string, row: number, column: string, text: string): string {
  if (text !== "") return text;
  throw new LogError(file, row, `no label in column '${column}', which names the run of each row; every row needs one`);
}
