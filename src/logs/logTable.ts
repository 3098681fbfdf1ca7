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
  if (missing.length === 0) return;
  throw new LogError(
    file,
    null,
    `has no column ${missing.map((name) => `'${name}'`).join(", ")}; it has ${present.map((name) => `'${name}'`).join(", ")}. ` +
      "Name the right ones under logs.columns, logs.time or logs.run of the plant file",
  );
}
