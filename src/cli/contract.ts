/** What every command shares: where it writes, how it ends, its common options. */
export type ExitStatus = 0 | 1 | 2 | 3;

export interface Streams {
  readonly out: NodeJS.WriteStream;
  readonly err: NodeJS.WriteStream;
}

export type RefitOptions = RunOptions & { readonly logs: readonly string[]; readonly always: boolean };

export interface RunOptions {
  readonly out: string;
  readonly json: boolean;
  readonly quiet: boolean;
  readonly seed?: number;
}
