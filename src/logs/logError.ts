/** A log that cannot be read as declared: the file, the row where there is one, what was found and what to do. */
export class LogError extends Error {
  constructor(
    readonly file: string,
    readonly row: number | null,
    message: string,
  ) {
    super(row === null ? `${file}: ${message}` : `${file}:${row}: ${message}`);
  }
}
