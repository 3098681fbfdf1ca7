/** Declared symmetry and declared unknown terms of a plant file. */
import type { Symmetry, UnknownTerm } from "./plant.js";
import type { PlantDraft } from "./plantSchema.js";
import type { Path, Report } from "./problems.js";
import { indexOf, type Quantities } from "./readQuantities.js";
import { unitNamed } from "./units.js";

export function readSymmetry(draft: PlantDraft, quantities: Quantities, report: Report): Symmetry {
  const { names } = quantities;
  const shifted = (draft.symmetry?.translation ?? []).map((name, i) =>
    name === undefined ? null : indexOf(name, names.states, "state", ["symmetry", "translation", i], report),
  );
  const rotation = readRotation(draft, quantities, report);
  const all = [...shifted, ...(rotation?.position ?? [])].filter((index) => index !== null);
  const translation = [...new Set(all)].sort((a, b) => a - b);
  if (rotation !== null && translation.includes(rotation.heading))
    report(
      ["symmetry", "translation"],
      `'${names.states[rotation.heading]}' is the heading of the rotation and cannot be a translation too; remove it here`,
    );
  if (names.states.length > 0 && names.states.every((_, i) => translation.includes(i) || i === rotation?.heading))
    report(
      ["symmetry"],
      "the symmetry leaves no state for the metric and its box; at least one state must be in neither",
      { key: true },
    );
  return { translation, rotation };
}

function readRotation(draft: PlantDraft, { states, names }: Quantities, report: Report): Symmetry["rotation"] {
  const rotation = draft.symmetry?.rotation;
  if (rotation === undefined) return null;
  const path = ["symmetry", "rotation"];
  const find = (name: string | undefined, at: Path, si: string, kind: string): number | null => {
    if (name === undefined) return null;
    const index = indexOf(name, names.states, "state", at, report);
    if (index === null) return null;
    const unit = states[index]!.unit;
    if (unit.name !== "1" && unitNamed(unit.name)?.si !== si)
      report(at, `'${name}' has the unit ${unit.name}; a ${kind} is allowed here (unit such as ${si})`);
    return index;
  };
  const [x, y] = [0, 1].map((i) => find(rotation.position?.[i], [...path, "position", i], "m", "length"));
  const heading = find(rotation.heading, [...path, "heading"], "rad", "plane angle");
  if (x === null || x === undefined || y === null || y === undefined || heading === null) return null;
  if (x === y) {
    report(
      [...path, "position"],
      `the position pair names '${names.states[x]}' twice; name the two world-frame positions [x, y]`,
    );
    return null;
  }
  return { position: [x, y], heading };
}

export function readUnknowns(
  draft: PlantDraft,
  { names }: Quantities,
  symmetry: Symmetry,
  report: Report,
): UnknownTerm[] {
  const seen = new Set<string>();
  return (draft.unknown ?? []).flatMap((term, i): UnknownTerm[] => {
    if (term === undefined) return [];
    const path: Path = ["unknown", i];
    const { rate, gain, in: acts } = term;
    if ((rate === undefined) === (gain === undefined)) {
      report(
        path,
        "an unknown term has either `rate: STATE` or `gain: INPUT, in: STATE`, and `from`; give exactly one of rate and gain",
      );
      return [];
    }
    if (rate !== undefined && acts !== undefined)
      report([...path, "in"], "`in` belongs to `gain` only; remove it or write gain instead of rate", { key: true });
    if (gain !== undefined && acts === undefined)
      report(path, `gain '${gain}' needs \`in\`: the state on whose rate it acts`);
    const input = gain === undefined ? null : indexOf(gain, names.inputs, "input", [...path, "gain"], report);
    const stateKey = rate === undefined ? "in" : "rate";
    const stateName = rate ?? acts;
    const state =
      stateName === undefined ? null : indexOf(stateName, names.states, "state", [...path, stateKey], report);
    const dependsOn = readDependencies(term.from ?? [], [...path, "from"], names.states, symmetry, report);
    if (state === null) return [];
    if (symmetry.rotation?.position.includes(state))
      report(
        [...path, stateKey],
        `the rate of '${stateName}' turns with the declared rotation, so no unknown term can be added to it; add it to a body-frame speed`,
      );
    const key = `${state} ${input}`;
    if (seen.has(key))
      report(path, `this unknown term is declared twice; keep one and name all its states in \`from\``);
    seen.add(key);
    return [{ state, input, dependsOn }];
  });
}

/** Indices of named states of which none is cyclic nor the heading of a rotation, each once, in plant order. */
export function readDependencies(
  given: readonly (string | undefined)[],
  path: Path,
  states: readonly string[],
  { translation, rotation }: Symmetry,
  report: Report,
): number[] {
  const indices = given.map((name, i) => {
    if (name === undefined) return null;
    const at = [...path, i];
    const index = indexOf(name, states, "state", at, report);
    if (index === null) return null;
    const cause = translation.includes(index) ? "a translation" : index === rotation?.heading ? "a rotation" : null;
    const allowed = states.filter((_, s) => !translation.includes(s) && s !== rotation?.heading);
    if (cause !== null)
      report(
        at,
        `'${name}' is cyclic: symmetry declares ${cause} over it, so nothing may depend on it; allowed are ${allowed.join(", ")}`,
      );
    if (given.indexOf(name) < i) report(at, `'${name}' is named twice; name each state once`);
    return index;
  });
  return [...new Set(indices.filter((index) => index !== null))].sort((a, b) => a - b);
}
