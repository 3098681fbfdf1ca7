/** The container of a log by its ending; a new container is one more reader in the list. */
import { LogError } from "./logError.js";
import type { LogTable, WantedColumns } from "./logTable.js";
import { readArrow } from "./readArrow.js";
import { readCsv } from "./readCsv.js";

const READERS: readonly (readonly [RegExp, (file: string, wanted: WantedColumns) => Promise<LogTable>])[] = [
  [/\.csv$/i, readCsv],
  [/\.(arrow|arrows|ipc|feather)$/i, readArrow],
];

export function readTable(file: string, wanted: WantedColumns): Promise<LogTable> {
  const reader = READERS.find(([ending]) => ending.test(file));
  if (reader === undefined) {
    throw new LogError(
      file,
      null,
      "its ending names no container that can be read; .csv and .arrow (IPC file or stream) are allowed",
    );
  }
  return reader[1](file, wanted);
}
