/**
 * Bytes of an Arrow IPC file or stream into a table, for files that may be damaged: apache-arrow checks little, and a
 * changed length can keep it busy without end or promise more rows than the bytes can hold. Decoding has a time limit
 * (node:vm interrupts synchronous code), and what it gives is held against the size of the file.
 */
import { runInNewContext } from "node:vm";
import { type Table, tableFromIPC } from "apache-arrow";

/** Decoding reads headers only: seconds are far more than a whole file needs. */
const [LEAST_MS, MS_PER_MEGABYTE] = [3000, 50];

/** Throws an Error that says what is wrong with the bytes. */
export function arrowTable(bytes: Uint8Array): Table {
  const timeout = Math.ceil(LEAST_MS + (MS_PER_MEGABYTE * bytes.length) / 1e6);
  const table = runInNewContext("decode()", { decode: () => tableFromIPC(bytes) }, { timeout }) as Table;
  // a value takes a byte at least, but for nulls and booleans
  if (!(table.numRows <= 8 * bytes.length)) {
    throw new Error(`it claims ${table.numRows} rows in ${bytes.length} bytes`);
  }
  for (const { name } of table.schema.fields) {
    const length = table.getChild(name)?.length;
    if (length !== table.numRows) throw new Error(`column '${name}' has ${length} of ${table.numRows} rows`);
  }
  return table;
}
