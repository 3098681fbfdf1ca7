/** Mistakes in a plant file, each at its place. */

export interface Problem {
  /** From 1. */
  readonly line: number;
  /** From 1, in characters. */
  readonly column: number;
  /** What was given, what is allowed, what to do. */
  readonly message: string;
  /** The name that was probably meant. */
  readonly suggestion?: string;
}

/** One line a problem: path:line:column: message. */
export function formatProblems(path: string, problems: readonly Problem[]): string {
  return problems
    .map(({ line, column, message, suggestion }) => {
      const meant = suggestion === undefined ? "" : ` (did you mean '${suggestion}'?)`;
      return `${path}:${line}:${column}: ${message}${meant}`;
    })
    .join("\n");
}

/** Place of a value in the file: keys and list indices from the top. */
export type Path = readonly (string | number)[];

/** Files a problem. It stands at the value of `path`; `key`: at its key; `offset`: inside its text. */
export type Report = (
  path: Path,
  message: string,
  at?: { readonly key?: boolean; readonly offset?: number; readonly suggestion?: string | null },
) => void;
