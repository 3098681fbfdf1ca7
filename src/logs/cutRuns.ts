/**
 * A table into runs: units to SI, runs by label, pieces at gaps and at bad stamps, headings unwrapped within a piece.
 * Nothing is dropped or doubted silently: every fault is a finding.
 */
import type { Plant } from "../plant/plant.js";
import { activeStates } from "../plant/scaling.js";
import type { LogTable } from "./logTable.js";
import type { Piece, Run } from "./recording.js";

export type FindingKind =
  | "missingValues"
  | "timeStepsBack"
  | "repeatedStamps"
  | "gap"
  | "shortPiece"
  | "scale"
  | "outsideEnvelope"
  | "inputOutsideRange"
  | "constantInput"
  | "runDropped";

export interface Finding {
  readonly kind: FindingKind;
  readonly file: string;
  /** Null: the whole file. */
  readonly run: string | null;
  readonly count: number;
  /** First row it was seen at (1 is the first row of numbers); null: not of one row. */
  readonly row: number | null;
  readonly text: string;
}

/** Shortest useful piece, samples. */
const LEAST_SAMPLES = 10;

export function cutRuns(plant: Plant, table: LogTable): { runs: Run[]; findings: Finding[] } {
  const findings: Finding[] = [];
  const groups = rowsByRun(table);
  const runs = [...groups].flatMap(([id, rows]) => cutRun(plant, table, id, rows, findings) ?? []);
  return { runs, findings };
}

function rowsByRun(table: LogTable): Map<string, number[]> {
  const groups = new Map<string, number[]>();
  for (let k = 0; k < table.rows; k++) {
    const id = table.runs === null ? "1" : table.runs[k]!;
    const rows = groups.get(id);
    if (rows === undefined) groups.set(id, [k]);
    else rows.push(k);
  }
  return groups;
}

function cutRun(plant: Plant, table: LogTable, id: string, rows: readonly number[], findings: Finding[]): Run | null {
  const { logs } = plant;
  const time = table.columns.get(logs.time.column)!;
  const states = logs.states.map(({ column }) => table.columns.get(column)!);
  const inputs = logs.inputs.map(({ column }) => table.columns.get(column)!);
  const all = [time, ...states, ...inputs];
  const tally = (kind: FindingKind, text: string) => {
    let count = 0;
    let first: number | null = null;
    return {
      add: (row: number): void => {
        count++;
        first ??= row + 1;
      },
      close: (): void => {
        if (count > 0) findings.push({ kind, file: table.file, run: id, count, row: first, text });
      },
    };
  };
  const missing = tally("missingValues", "rows with a missing or non-finite value were dropped");
  const back = tally("timeStepsBack", "time steps back; a new piece starts there");
  const repeated = tally("repeatedStamps", "rows that repeat a stamp were dropped");
  const gaps = tally("gap", `steps longer than ${logs.maxGap} s; a new piece starts after each`);
  const short = tally("shortPiece", `pieces of fewer than ${LEAST_SAMPLES} samples were dropped`);

  const pieces: number[][] = [];
  let open: number[] = [];
  const close = (): void => {
    if (open.length >= LEAST_SAMPLES) pieces.push(open);
    else if (open.length > 0) short.add(open[0]!);
    open = [];
  };
  let last = Number.NaN;
  for (const row of rows) {
    if (!all.every((column) => Number.isFinite(column[row]!))) {
      missing.add(row);
      continue;
    }
    const stamp = time[row]! * logs.time.unit.factor;
    if (stamp === last) {
      repeated.add(row);
      continue;
    }
    if (stamp < last) {
      back.add(row);
      close();
    } else if (stamp - last > logs.maxGap) {
      gaps.add(row);
      close();
    }
    open.push(row);
    last = stamp;
  }
  close();
  for (const counter of [missing, back, repeated, gaps, short]) counter.close();
  if (pieces.length === 0) {
    findings.push({
      kind: "runDropped",
      file: table.file,
      run: id,
      count: rows.length,
      row: rows[0]! + 1,
      text: "no piece is long enough; the run was dropped",
    });
    return null;
  }
  return { id, file: table.file, pieces: pieces.map((piece) => toPiece(plant, time, states, inputs, piece)) };
}

function toPiece(
  plant: Plant,
  time: Float64Array,
  states: readonly Float64Array[],
  inputs: readonly Float64Array[],
  rows: readonly number[],
): Piece {
  const { logs } = plant;
  const [n, m] = [states.length, inputs.length];
  const out = {
    time: Float64Array.from(rows, (row) => time[row]! * logs.time.unit.factor),
    states: new Float64Array(rows.length * n),
    inputs: new Float64Array(rows.length * m),
  };
  const bounded = activeStates(plant);
  for (let i = 0; i < n; i++) {
    const { factor } = logs.states[i]!.unit;
    // an angle with an envelope does not go round: unwrapping it would hide a wrong unit
    const goesRound = plant.states[i]!.isAngle && !bounded.includes(i);
    let turns = 0;
    for (const [k, row] of rows.entries()) {
      const value = states[i]![row]! * factor;
      if (goesRound && k > 0) {
        const step = value + turns - out.states[(k - 1) * n + i]!;
        turns -= 2 * Math.PI * Math.round(step / (2 * Math.PI));
      }
      out.states[k * n + i] = value + turns;
    }
  }
  for (let j = 0; j < m; j++) {
    const { factor } = logs.inputs[j]!.unit;
    for (const [k, row] of rows.entries()) out.inputs[k * m + j] = inputs[j]![row]! * factor;
  }
  return out;
}
