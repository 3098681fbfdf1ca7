/** Logs, disturbance, margin and networks of a plant file. */
import { dirname, resolve } from "node:path";
import { nearestName } from "./nearestName.js";
import type { LogSource, MarginGoal, PlantSettings, Symmetry } from "./plant.js";
import type { PlantDraft, PlantFile } from "./plantSchema.js";
import type { Path, Report } from "./problems.js";
import { type Quantities, readUnit } from "./readQuantities.js";
import { readDependencies } from "./readStructure.js";
import { type KnownUnit, unitNamed, unitsLike } from "./units.js";

const SECOND = unitNamed("s")!;

/** Everything about the settings and logs that is more than form. */
export function checkSettings(draft: PlantDraft, quantities: Quantities, symmetry: Symmetry, report: Report): void {
  const { time, columns } = draft.logs ?? {};
  checkUnit(time?.unit, SECOND, ["logs", "time", "unit"], report);
  checkColumns(columns ?? {}, quantities, report);
  const split = draft.disturbance?.split;
  const shares = [split?.fit ?? 0.5, split?.calibration ?? 0.3, split?.test ?? 0.2];
  const sum = shares.reduce((total, share) => total + share, 0);
  if (split !== undefined && Math.abs(sum - 1) > 1e-9)
    report(
      ["disturbance", "split"],
      `the split adds up to ${Number(sum.toPrecision(6))}; fit + calibration + test must be 1`,
    );
  readGoal(draft.margin?.minimise, quantities, symmetry, report);
  const from = draft.networks?.metric?.from;
  readDependencies(from ?? [], ["networks", "metric", "from"], quantities.names.states, symmetry, report);
}

function checkUnit(name: string | undefined, like: KnownUnit, path: Path, report: Report): void {
  if (name === undefined) return;
  const unit = readUnit(name, path, report);
  if (unit.si !== "" && like.si !== "" && unit.si !== like.si)
    report(path, `unit '${name}' cannot be converted to ${like.name}; allowed are ${unitsLike(like).join(", ")}`);
}

function checkColumns(
  columns: NonNullable<NonNullable<PlantDraft["logs"]>["columns"]>,
  { states, inputs }: Quantities,
  report: Report,
): void {
  const all = [...states, ...inputs];
  const names = all.map(({ name }) => name);
  for (const [name, column] of Object.entries(columns)) {
    const path = ["logs", "columns", name];
    const spec = all.find((quantity) => quantity.name === name);
    if (spec === undefined) {
      report(path, `unknown state or input '${name}'; allowed are ${names.join(", ")}`, {
        key: true,
        suggestion: nearestName(name, names),
      });
      continue;
    }
    const unit = unitNamed(spec.unit.name);
    if (unit !== null) checkUnit(column?.unit, unit, [...path, "unit"], report);
  }
  const read = new Map<string, string>();
  for (const name of names) {
    const column = columns[name]?.column ?? name;
    const other = read.get(column);
    if (other !== undefined)
      report(
        ["logs", "columns", name],
        `'${name}' and '${other}' are both read from column '${column}'; name a column for each`,
      );
    read.set(column, name);
  }
}

function readGoal(
  given: string | undefined,
  { names }: Quantities,
  { rotation }: Symmetry,
  report: Report,
): MarginGoal {
  const state = names.states.indexOf(given ?? "");
  const path = ["margin", "minimise"];
  if (given === "across" || given === "along" || given === "planar") {
    if (rotation === null)
      report(
        path,
        `margin '${given}' needs a declared rotation (symmetry.rotation: position and heading); declare it or name a state: ${names.states.join(", ")}`,
      );
    return { kind: given };
  }
  if (given !== undefined && state < 0) {
    const allowed = [...names.states, ...(rotation === null ? [] : ["across", "along", "planar"])];
    report(path, `unknown margin '${given}'; allowed are ${allowed.join(", ")}`, {
      suggestion: nearestName(given, allowed),
    });
  }
  return { kind: "state", state: Math.max(state, 0) };
}

/** Log source of a checked file; `plantPath` is the plant file's own path. */
export function logSource(file: PlantFile, plantPath: string, { states, inputs }: Quantities): LogSource {
  const { files, time, run, columns, maxGap } = file.logs;
  const columnOf = (spec: { name: string; unit: LogSource["time"]["unit"] }): LogSource["time"] => {
    const given = columns[spec.name];
    return { column: given?.column ?? spec.name, unit: plainUnit(given?.unit ?? spec.unit.name) };
  };
  return {
    files: files.map((name) => resolve(dirname(plantPath), name)),
    time: { column: time.column, unit: plainUnit(time.unit) },
    run: run ?? null,
    states: states.map(columnOf),
    inputs: inputs.map(columnOf),
    maxGap,
  };
}

/** Settings of a checked file. */
export function plantSettings(file: PlantFile, quantities: Quantities, symmetry: Symmetry): PlantSettings {
  const { disturbance, margin, networks, logs, seed } = file;
  const ignore: Report = () => undefined;
  const names = quantities.names.states;
  const free = names.filter((_, i) => !symmetry.translation.includes(i) && i !== symmetry.rotation?.heading);
  return {
    confidence: disturbance.confidence,
    split: disturbance.split,
    window: disturbance.window === "auto" ? null : disturbance.window,
    unsupported: logs.unsupported,
    goal: readGoal(margin.minimise, quantities, symmetry, ignore),
    authorityLimit: margin.authority,
    roomLimit: margin.room,
    initialDistance: margin.initialDistance,
    rate: margin.rate === "auto" ? null : margin.rate,
    metricDependsOn: readDependencies(networks.metric.from ?? free, [], names, symmetry, ignore),
    residualNet: networks.residual,
    metricNet: { width: networks.metric.width, steps: networks.metric.steps, rounds: networks.metric.rounds },
    seed,
  };
}

function plainUnit(name: string): LogSource["time"]["unit"] {
  const { factor } = unitNamed(name)!;
  return { name, factor };
}
