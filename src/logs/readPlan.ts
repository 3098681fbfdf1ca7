/**
 * A plan: time, every state and every input of one nominal trajectory, in any container that logs may have. It is read
 * like a log of one run, but nothing is dropped: whatever would be a finding in a log is an error here.
 *
 * Columns are those of the logs (name and unit of `logs` in the plant file), so that a recorded run can serve as a plan; a
 * table that lacks one of them must name all its columns by the plant file's own names of states and inputs, in their units
 * there, and `time` in seconds.
 */
import { existsSync } from "node:fs";
import type { LogSource, Plant } from "../plant/plant.js";
import { cutRuns } from "./cutRuns.js";
import { LogError } from "./logError.js";
import type { LogTable } from "./logTable.js";
import { readTable } from "./readTable.js";
import type { Piece } from "./recording.js";

/** SI and radians, headings unwrapped; row k of the inputs is held from time k to time k+1. */
export interface Plan extends Piece {
  readonly file: string;
}

/** Throws a LogError with the file and the row. */
export async function readPlan(plant: Plant, file: string): Promise<Plan> {
  if (!existsSync(file)) throw new LogError(file, null, "no such file; a plan with time, states and inputs is needed");
  const { table, logs } = await readEither(plant, file);
  // one run without gaps: a plan may be as coarse as its maker likes
  const asRun: Plant = { ...plant, logs: { ...logs, run: null, maxGap: Number.POSITIVE_INFINITY } };
  const { runs, findings } = cutRuns(asRun, table);
  const fault = findings[0];
  if (fault !== undefined) {
    const row = fault.row ?? 1;
    throw new LogError(
      file,
      null,
      `row ${row} of its numbers${missingIn(table, row)}: ${fault.text}; a plan must be whole, its time strictly rising`,
    );
  }
  return { ...runs[0]!.pieces[0]!, file };
}

async function readEither(plant: Plant, file: string): Promise<{ table: LogTable; logs: LogSource }> {
  const read = async (logs: LogSource) => ({
    table: await readTable(file, { numbers: namesOf(logs), run: null }),
    logs,
  });
  let asLog: unknown;
  try {
    return await read(plant.logs);
  } catch (error) {
    asLog = error;
  }
  const byName = ownNames(plant);
  try {
    return await read(byName);
  } catch (error) {
    if (!(asLog instanceof LogError) || !(error instanceof LogError) || asLog.row !== null) throw asLog;
    if (error.row !== null || namesOf(byName).join() === namesOf(plant.logs).join()) throw error;
    const list = (logs: LogSource): string => namesOf(logs).join(", ");
    throw new LogError(
      file,
      null,
      `a plan needs either the columns of the logs (${list(plant.logs)}) or the plant file's names (${list(byName)}). ` +
        `Read in the first way: ${asLog.message}. In the second: ${error.message}`,
    );
  }
}

function namesOf(logs: LogSource): string[] {
  return [...new Set([logs.time, ...logs.states, ...logs.inputs].map(({ column }) => column))];
}

function ownNames({ logs, states, inputs }: Plant): LogSource {
  const own = ({ name, unit }: Plant["inputs"][number]) => ({ column: name, unit });
  return {
    ...logs,
    time: { column: "time", unit: { name: "s", factor: 1 } },
    states: states.map(own),
    inputs: inputs.map(own),
  };
}

/** The column without a number in a row, for messages. */
function missingIn({ columns }: LogTable, row: number): string {
  const found = [...columns].find(([, values]) => !Number.isFinite(values[row - 1]!));
  return found === undefined ? "" : ` ('${found[0]}' is ${found[1][row - 1]})`;
}
