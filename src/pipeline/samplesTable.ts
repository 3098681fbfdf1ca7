/**
 * The runs as every later stage reads them: one row a sample, SI, with the run's part of the split. Table samples.arrow.
 */
import type { Piece, Run } from "../logs/recording.js";
import type { SplitRuns } from "../logs/splitRuns.js";
import type { Plant } from "../plant/plant.js";

export type Part = "fit" | "calibration" | "test";
export const PARTS: readonly Part[] = ["fit", "calibration", "test"];

export interface Column {
  readonly name: string;
  readonly unit: string;
  readonly values: Float64Array | readonly string[];
}

export function samplesColumns(plant: Plant, split: SplitRuns): Column[] {
  const rows = PARTS.flatMap((part) =>
    split[part].flatMap((run) => run.pieces.map((piece, index) => ({ part, run, piece, index }))),
  );
  const text = (of: (row: (typeof rows)[number]) => string): string[] =>
    rows.flatMap((row) => new Array<string>(row.piece.time.length).fill(of(row)));
  const numbers = (of: (row: (typeof rows)[number], k: number) => number): Float64Array =>
    Float64Array.from(rows.flatMap((row) => Array.from(row.piece.time, (_, k) => of(row, k))));
  const [n, m] = [plant.states.length, plant.inputs.length];
  return [
    { name: "part", unit: "", values: text((row) => row.part) },
    { name: "file", unit: "", values: text((row) => row.run.file) },
    { name: "run", unit: "", values: text((row) => row.run.id) },
    { name: "piece", unit: "1", values: numbers((row) => row.index) },
    { name: "time", unit: "s", values: numbers((row, k) => row.piece.time[k]!) },
    ...plant.states.map((state, i) => ({
      name: state.name,
      unit: "SI",
      values: numbers((row, k) => row.piece.states[k * n + i]!),
    })),
    ...plant.inputs.map((input, j) => ({
      name: input.name,
      unit: "SI",
      values: numbers((row, k) => row.piece.inputs[k * m + j]!),
    })),
  ];
}

/** The inverse of samplesColumns. */
export function splitFromColumns(
  plant: Plant,
  columns: ReadonlyMap<string, Float64Array | readonly string[]>,
): SplitRuns {
  const text = (name: string): readonly string[] => columns.get(name) as readonly string[];
  const numbers = (name: string): Float64Array => columns.get(name) as Float64Array;
  const [parts, files, ids, pieces, time] = [
    text("part"),
    text("file"),
    text("run"),
    numbers("piece"),
    numbers("time"),
  ];
  const states = plant.states.map((state) => numbers(state.name));
  const inputs = plant.inputs.map((input) => numbers(input.name));
  const split: Record<Part, Run[]> = { fit: [], calibration: [], test: [] };
  const rowMajor = (series: readonly Float64Array[], from: number, to: number): Float64Array => {
    const out = new Float64Array((to - from) * series.length);
    for (let k = from; k < to; k++)
      for (const [i, values] of series.entries()) out[(k - from) * series.length + i] = values[k]!;
    return out;
  };
  let from = 0;
  let open: { key: string; pieces: Piece[] } | null = null;
  for (let k = 1; k <= time.length; k++) {
    const isSame = k < time.length && parts[k] === parts[from] && files[k] === files[from] && ids[k] === ids[from];
    if (isSame && pieces[k] === pieces[from]) continue;
    const part = parts[from] as Part;
    const key = `${part}\n${files[from]}\n${ids[from]}`;
    if (open === null || open.key !== key) {
      open = { key, pieces: [] };
      split[part].push({ id: ids[from]!, file: files[from]!, pieces: open.pieces });
    }
    open.pieces.push({
      time: time.slice(from, k),
      states: rowMajor(states, from, k),
      inputs: rowMajor(inputs, from, k),
    });
    from = k;
  }
  return split;
}
