/** Formulas of a plant file: rates split into f and B, leftover channels into G. */
import { mentions, partsOf } from "./evaluateExpression.js";
import type { Expression } from "./expression.js";
import { nearestName } from "./nearestName.js";
import { type Place, parseExpression } from "./parseExpression.js";
import type { LeftoverChannel, RateExpressions } from "./plant.js";
import { MAX_LEFTOVER, type PlantDraft } from "./plantSchema.js";
import type { Path, Report } from "./problems.js";
import { indexOf, type Quantities, readUnit, reportCount } from "./readQuantities.js";
import { rebuild, ZERO } from "./simplify.js";
import { splitAffine } from "./splitAffine.js";

export interface Rates {
  readonly expressions: RateExpressions;
  readonly leftover: readonly LeftoverChannel[];
}

/** A formula with a mistake gets zero as a stand-in. */
export function readRates(draft: PlantDraft, quantities: Quantities, report: Report): Rates {
  const { f, B } = readPrior(draft, quantities, report);
  const { leftover, G } = readLeftover(draft, quantities, report);
  return { expressions: { f, B, G }, leftover };
}

function readPrior(draft: PlantDraft, { names }: Quantities, report: Report): Pick<RateExpressions, "f" | "B"> {
  const f: Expression[] = names.states.map(() => ZERO);
  const B: (readonly Expression[])[] = names.states.map(() => names.inputs.map(() => ZERO));
  if (draft.rates === undefined) return { f, B };
  for (const [name, text] of Object.entries(draft.rates)) {
    const path = ["rates", name];
    const i = indexOf(name, names.states, "state", path, report, { key: true });
    if (i === null || text === undefined) continue;
    const parsed = readFormula(text, path, names, report);
    if (parsed === null) continue;
    const split = splitAffine(parsed.expression, names.inputs.length);
    if (split.ok) {
      f[i] = split.f;
      B[i] = split.B;
      continue;
    }
    const { start, end } = parsed.places.get(split.term)!;
    report(
      path,
      `the rate of '${name}' is not affine in the inputs: ${split.reason} in '${String(text).slice(start, end).trim()}'; allowed is f(states) + input * g(states): name the product a state or an input of its own`,
      { offset: start },
    );
  }
  for (const name of names.states) {
    if (!Object.hasOwn(draft.rates, name) && !isMeantByAnother(name, Object.keys(draft.rates), names.states))
      report(["rates"], `the rate of state '${name}' is missing; every state needs one (0 if it never changes)`, {
        key: true,
      });
  }
  return { f, B };
}

/** True when an unknown rate name has been reported already and is near this one. */
function isMeantByAnother(name: string, given: readonly string[], states: readonly string[]): boolean {
  return given.some((key) => !states.includes(key) && nearestName(key, states) === name);
}

function readLeftover(
  draft: PlantDraft,
  { names }: Quantities,
  report: Report,
): { leftover: LeftoverChannel[]; G: Expression[][] } {
  const channels = Object.entries(draft.leftover ?? {});
  const G = names.states.map(() => channels.map((): Expression => ZERO));
  if (draft.leftover !== undefined) reportCount("leftover", channels.length, MAX_LEFTOVER, report);
  if (channels.length > names.states.length)
    report(
      ["leftover"],
      `${channels.length} channels for ${names.states.length} states; at most one channel a state is allowed: no two may have the same effect`,
      { key: true },
    );
  const leftover = channels.map(([name, channel], k): LeftoverChannel => {
    const path = ["leftover", name];
    const unit = readUnit(channel?.unit, [...path, "unit"], report);
    const effects = Object.entries(channel?.on ?? {});
    if (channel?.on !== undefined && effects.length === 0)
      report([...path, "on"], `leftover channel '${name}' acts on no rate; name at least one state`, { key: true });
    for (const [state, text] of effects) {
      const at = [...path, "on", state];
      const i = indexOf(state, names.states, "state", at, report, { key: true });
      if (i === null || text === undefined) continue;
      const parsed = readFormula(text, at, names, report);
      if (parsed === null) continue;
      const input = firstInput(parsed.expression);
      if (input === null) G[i]![k] = rebuild(parsed.expression, (leaf) => leaf);
      else
        report(at, "the effect of a leftover channel may not hold an input; allowed are states and parameters", {
          offset: parsed.places.get(input)!.start,
        });
    }
    return { name, unit };
  });
  return { leftover, G };
}

function readFormula(
  text: string | number,
  path: Path,
  names: Quantities["names"],
  report: Report,
): { expression: Expression; places: ReadonlyMap<Expression, Place> } | null {
  const source = String(text);
  const parsed = parseExpression(source, names);
  if (parsed.ok) return parsed;
  for (const { offset, message, suggestion } of parsed.problems) {
    const isCut = /^\s*atan2\([^)]*$/.test(source);
    const hint = isCut ? "; put a formula with a comma in quotes when it stands between { }" : "";
    report(path, message + hint, { offset, suggestion: suggestion ?? null });
  }
  return null;
}

function firstInput(e: Expression): Expression | null {
  if (!mentions(e, "input")) return null;
  if (e.kind === "input") return e;
  for (const part of partsOf(e)) {
    const found = firstInput(part);
    if (found !== null) return found;
  }
  return null;
}
