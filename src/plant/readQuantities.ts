/** States, inputs and parameters of a plant file: names, units, envelope and ranges in SI. */
import { FUNCTIONS } from "./expression.js";
import { nearestName } from "./nearestName.js";
import type { ExpressionNames } from "./parseExpression.js";
import type { InputSpec, StateSpec } from "./plant.js";
import { MAX_INPUTS, MAX_STATES, type PlantDraft } from "./plantSchema.js";
import type { Path, Report } from "./problems.js";
import { isAngleUnit, type KnownUnit, unitNamed, unitNames } from "./units.js";

export interface Quantities {
  readonly states: readonly StateSpec[];
  readonly inputs: readonly InputSpec[];
  readonly names: ExpressionNames;
}

/** Words that `margin.minimise` and formulas use for themselves. */
const RESERVED: readonly string[] = ["pi", ...FUNCTIONS, "across", "along", "planar"];

/** Null when the file has no map of states or of inputs at all. A part with a mistake gets a stand-in. */
export function readQuantities(draft: PlantDraft, report: Report): Quantities | null {
  reportNames(draft, report);
  if (draft.states === undefined || draft.inputs === undefined) return null;
  const states = Object.entries(draft.states).map(([name, spec]): StateSpec => {
    const path = ["states", name];
    const unit = readUnit(spec?.unit, [...path, "unit"], report);
    return {
      name,
      unit,
      ...readInterval(spec?.envelope, unit, [...path, "envelope"], report),
      isAngle: isAngleUnit(unit),
    };
  });
  const inputs = Object.entries(draft.inputs).map(([name, spec]): InputSpec => {
    const path = ["inputs", name];
    const unit = readUnit(spec?.unit, [...path, "unit"], report);
    return { name, unit, ...readInterval(spec?.range, unit, [...path, "range"], report) };
  });
  reportCount("states", states.length, MAX_STATES, report);
  reportCount("inputs", inputs.length, MAX_INPUTS, report);
  if (inputs.length > states.length && states.length > 0)
    report(
      ["inputs"],
      `${inputs.length} inputs for ${states.length} states; at most one input a state is allowed: B must have full column rank`,
      { key: true },
    );
  const parameters = new Map(Object.entries(draft.parameters ?? {}).map(([name, value]) => [name, value ?? 1]));
  return {
    states,
    inputs,
    names: { states: states.map((s) => s.name), inputs: inputs.map((s) => s.name), parameters },
  };
}

/** A list key must hold 1 to `most` entries. */
export function reportCount(key: string, given: number, most: number, report: Report): void {
  if (given === 0) report([key], `'${key}' is empty; 1 to ${most} are allowed`, { key: true });
  if (given > most) report([key], `${given} ${key} given; at most ${most} are allowed`, { key: true });
}

/** The unit of that name, of the same kind as `like` if given; a stand-in after a mistake. */
export function readUnit(name: string | undefined, path: Path, report: Report): KnownUnit {
  const standIn: KnownUnit = { name: "1", factor: 1, si: "" };
  if (name === undefined) return standIn;
  const unit = unitNamed(name);
  if (unit !== null) return unit;
  report(path, `unknown unit '${name}'; allowed are ${unitNames().join(", ")}`, {
    suggestion: nearestName(name, unitNames()),
  });
  return standIn;
}

function readInterval(
  given: readonly (number | undefined)[] | undefined,
  unit: KnownUnit,
  path: Path,
  report: Report,
): { min: number; max: number } {
  const [least, greatest] = given ?? [];
  if (least === undefined || greatest === undefined) return { min: 0, max: 1 };
  if (!(least < greatest))
    report(
      path,
      `'${path.join(".")}' is [${least}, ${greatest}]; the first must be below the second: write [least, greatest]`,
    );
  return { min: least * unit.factor, max: greatest * unit.factor };
}

function reportNames(draft: PlantDraft, report: Report): void {
  const seen = new Map<string, string>();
  for (const section of ["states", "inputs", "parameters"] as const) {
    for (const name of Object.keys(draft[section] ?? {})) {
      const before = seen.get(name);
      if (RESERVED.includes(name))
        report([section, name], `'${name}' is reserved; choose another name than ${RESERVED.join(", ")}`, {
          key: true,
        });
      if (before !== undefined)
        report(
          [section, name],
          `'${name}' is already one of the ${before}; every name in states, inputs and parameters must differ`,
          { key: true },
        );
      seen.set(name, section);
    }
  }
}

/** Index of a named state or input; reports and returns null when there is none. */
export function indexOf(
  name: string,
  among: readonly string[],
  what: "state" | "input",
  path: Path,
  report: Report,
  at: { readonly key?: boolean } = {},
): number | null {
  const index = among.indexOf(name);
  if (index >= 0) return index;
  report(path, `unknown ${what} '${name}'; allowed are ${among.join(", ")}`, {
    ...at,
    suggestion: nearestName(name, among),
  });
  return null;
}
