/** CSV by csv-parse, streamed: a header row, then numbers; an empty field is a missing value (NaN). */
import { createReadStream } from "node:fs";
import { CsvError, parse } from "csv-parse";
import { LogError } from "./logError.js";
import { type LogTable, requireColumns, runLabel, type WantedColumns } from "./logTable.js";

export async function readCsv(file: string, wanted: WantedColumns): Promise<LogTable> {
  const parser = parse({ bom: true, trim: true, skip_empty_lines: true, info: true });
  const source = createReadStream(file);
  // pipe() does not hand over errors: without this a file that is not there would be waited for without end
  source.on("error", (error) => parser.destroy(error));
  source.pipe(parser);
  let header: string[] | null = null;
  let at: number[] = [];
  let runAt = -1;
  const values: GrowingColumn[] = wanted.numbers.map(() => growingColumn());
  const runs: string[] = [];
  const known = new Map<string, string>();
  let rows = 0;
  try {
    for await (const { record, info } of parser as AsyncIterable<{ record: string[]; info: { lines: number } }>) {
      if (header === null) {
        header = record;
        requireColumns(file, header, wanted);
        at = wanted.numbers.map((name) => record.indexOf(name));
        runAt = wanted.run === null ? -1 : record.indexOf(wanted.run);
        continue;
      }
      rows++;
      for (const [c, index] of at.entries())
        values[c]!.push(numberIn(file, info.lines, wanted.numbers[c]!, record[index]!));
      if (runAt >= 0) runs.push(shared(known, runLabel(file, info.lines, wanted.run!, record[runAt]!)));
    }
  } catch (error) {
    if (error instanceof LogError) throw error;
    throw readFailure(file, error);
  }
  if (header === null)
    throw new LogError(file, null, "is empty; a header row with column names and rows of numbers are needed");
  if (rows === 0) throw new LogError(file, null, "has a header but no rows");
  return {
    file,
    rows,
    columns: new Map(wanted.numbers.map((name, c) => [name, values[c]!.values()])),
    runs: runAt < 0 ? null : runs,
  };
}

function numberIn(file: string, row: number, column: string, text: string): number {
  if (text === "" || /^nan$/i.test(text)) return Number.NaN;
  const value = Number(text);
  if (Number.isNaN(value)) {
    throw new LogError(
      file,
      row,
      `'${text}' in column '${column}' is not a number; numbers and empty fields are allowed`,
    );
  }
  return value;
}

function readFailure(file: string, error: unknown): LogError {
  if (error instanceof CsvError) {
    return new LogError(
      file,
      typeof error.lines === "number" ? error.lines : null,
      `is not whole CSV: ${error.message.replace(/\s+/g, " ")}`,
    );
  }
  const code = (error as NodeJS.ErrnoException).code;
  const reason =
    code === "ENOENT" ? "no such file" : code === "EISDIR" ? "is a folder" : String((error as Error).message);
  return new LogError(file, null, `${reason}; logs.files of the plant file names the logs, relative to it`);
}

/** One copy of each run label, however many rows carry it. */
function shared(known: Map<string, string>, text: string): string {
  const held = known.get(text);
  if (held !== undefined) return held;
  known.set(text, text);
  return text;
}

interface GrowingColumn {
  push(value: number): void;
  values(): Float64Array;
}

function growingColumn(): GrowingColumn {
  let data = new Float64Array(1024);
  let length = 0;
  return {
    push: (value) => {
      if (length === data.length) {
        const next = new Float64Array(2 * length);
        next.set(data);
        data = next;
      }
      data[length++] = value;
    },
    values: () => data.slice(0, length),
  };
}
