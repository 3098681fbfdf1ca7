/** Mistakes of a plant that only its compiled rates show, in words and at their place in the file. */
import type { Random } from "../num/random.js";
import { checkRates, type RateFault } from "./checkRates.js";
import { checkSymmetry, SYMMETRY_TOLERANCE, type SymmetryMismatch } from "./checkSymmetry.js";
import type { CompiledRates, Symmetry, UnknownTerm } from "./plant.js";
import type { Report } from "./problems.js";
import type { Quantities } from "./readQuantities.js";
import type { Rates } from "./readRates.js";
import { samplePoints } from "./samplePoints.js";

/** Random points, besides the grid of the envelope. */
const RANDOM_POINTS = 256;

export function reportCompiled(
  rates: CompiledRates,
  quantities: Quantities,
  { leftover }: Rates,
  symmetry: Symmetry,
  unknowns: readonly UnknownTerm[],
  random: Random,
  report: Report,
): void {
  const { states, inputs } = quantities;
  const points = samplePoints(states, random.stream("points"), RANDOM_POINTS);
  const learned = new Set(unknowns.map((term) => term.input));
  const judged = inputs.map((_, j) => j).filter((j) => !learned.has(j));
  const faults = checkRates(rates, states, inputs.length, leftover.length, judged, points);
  const channels = leftover.map(({ name }) => name);
  for (const fault of faults) reportFault(fault, quantities, channels, report);
  if (faults.some(({ kind }) => kind === "notFinite")) return;
  const mismatches = checkSymmetry(
    rates,
    states,
    symmetry,
    inputs.length,
    leftover.length,
    points,
    random.stream("moves"),
  );
  for (const mismatch of mismatches) reportMismatch(mismatch, quantities, channels, symmetry, report);
}

function reportFault(fault: RateFault, quantities: Quantities, channels: readonly string[], report: Report): void {
  const { states, inputs } = quantities.names;
  const where = quantities.states
    .map(({ name, unit }, i) => `${name} = ${Number((fault.at[i]! / unit.factor).toPrecision(4))} ${unit.name}`)
    .join(", ");
  if (fault.kind === "notFinite") {
    const rate = states[fault.state]!;
    const isSlope = fault.array === "dfdx" || fault.array === "dBdx";
    const path = fault.array === "G" ? ["leftover", channels[fault.column]!, "on", rate] : ["rates", rate];
    report(
      path,
      `${isSlope ? "a derivative of " : ""}the formula of rate '${rate}' is not finite inside the envelope, at ${where}; change the formula or shrink the envelope`,
    );
  } else if (fault.array === "B") {
    report(
      ["inputs", inputs[fault.column]!],
      `input '${inputs[fault.column]}' moves nothing that the other inputs do not move, at ${where}; B must have full column rank in the whole envelope: change the rates, merge the inputs or shrink the envelope`,
      { key: true },
    );
  } else {
    report(
      ["leftover", channels[fault.column]!],
      `leftover channel '${channels[fault.column]}' has no effect that the other channels do not have, at ${where}; G must have full column rank in the whole envelope: change or remove it`,
      { key: true },
    );
  }
}

function reportMismatch(
  { of, worst, array, rate, column }: SymmetryMismatch,
  { names }: Quantities,
  channels: readonly string[],
  symmetry: Symmetry,
  report: Report,
): void {
  if (worst <= SYMMETRY_TOLERANCE) return;
  // a shift of the position pair is implied by the rotation; that one then fails too and says so
  const isImplied = of.kind === "translation" && (symmetry.rotation?.position.includes(of.state) ?? false);
  const kind = of.kind === "rotation" || isImplied ? "rotation" : "translation";
  const declared =
    of.kind === "translation"
      ? `translation of '${names.states[of.state]}'`
      : "rotation of the position and the heading";
  const what = {
    f: `the rate of '${names.states[rate]}' without inputs`,
    B: `the effect of input '${names.inputs[column ?? 0]}' on the rate of '${names.states[rate]}'`,
    G: `the effect of leftover channel '${channels[column ?? 0]}' on the rate of '${names.states[rate]}'`,
  }[array];
  const remedy =
    array === "G" && of.kind === "rotation"
      ? "let the channel turn with the vehicle, e.g. {x: cos(heading), y: sin(heading)}, or remove the rotation"
      : "change the formula or remove the declaration";
  report(
    ["symmetry", kind],
    `the declared ${declared} does not hold: ${what} differs by up to ${Number((100 * worst).toPrecision(2))} % of its size; ${remedy}`,
    { key: true },
  );
}
