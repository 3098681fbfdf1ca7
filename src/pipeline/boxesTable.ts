/** Table boxes.arrow: the leaf boxes of a proof, with their ends in scaled active coordinates and their bounds. */
import type { SavedColumn } from "../logs/savedTable.js";
import type { Plant } from "../plant/plant.js";
import { activeStates } from "../plant/scaling.js";
import type { ListedClaims } from "../verify/proof/claims.js";
import type { LeafTable } from "../verify/proof/leafTable.js";

export function boxesColumns(plant: Plant, table: LeafTable): SavedColumn[] {
  const names = activeStates(plant).map((state) => plant.states[state]!.name);
  const { count, dimension } = table;
  const [pushes, spreads] = [table.pushes, table.spreads].map((values) =>
    count === 0 ? 0 : values.length / count,
  ) as [number, number];
  const strided = (values: Float64Array, stride: number, at: number): Float64Array =>
    Float64Array.from({ length: count }, (_, i) => values[i * stride + at]!);
  return [
    ...names.flatMap((name, i) => [
      { name: `${name}.lower`, unit: "scaled", values: strided(table.lower, dimension, i) },
      { name: `${name}.upper`, unit: "scaled", values: strided(table.upper, dimension, i) },
    ]),
    { name: "status", unit: "0 open, 1 proved, 2 refuted", values: Float64Array.from(table.status) },
    {
      name: "claim",
      unit: "0 none, 1 rate, 2 push, 3 spread, 4 authority, 5 definite",
      values: Float64Array.from(table.claim),
    },
    { name: "rate", unit: "1/s", values: table.rate },
    ...Array.from({ length: pushes }, (_, c) => ({
      name: `push ${c}`,
      unit: "1/s",
      values: strided(table.pushes, pushes, c),
    })),
    ...Array.from({ length: spreads }, (_, s) => ({
      name: `spread ${s}`,
      unit: "scaled",
      values: strided(table.spreads, spreads, s),
    })),
    { name: "authority", unit: "1/s", values: table.authority },
  ];
}

/** The inverse, for the table of these claims. Throws when a column is missing or has a length of its own. */
export function boxesFromColumns(
  plant: Plant,
  columns: ReadonlyMap<string, Float64Array | readonly string[]>,
  claims: ListedClaims,
): LeafTable {
  const names = activeStates(plant).map((state) => plant.states[state]!.name);
  const numbers = (name: string): Float64Array => {
    const values = columns.get(name);
    if (!(values instanceof Float64Array)) throw new Error(`the table of boxes has no column of numbers '${name}'`);
    return values;
  };
  const interleaved = (parts: readonly Float64Array[]): Float64Array => {
    const stride = parts.length;
    const out = new Float64Array((parts[0]?.length ?? 0) * stride);
    parts.forEach((part, at) => {
      part.forEach((value, i) => {
        out[i * stride + at] = value;
      });
    });
    return out;
  };
  const rate = numbers("rate");
  return {
    dimension: names.length,
    count: rate.length,
    lower: interleaved(names.map((name) => numbers(`${name}.lower`))),
    upper: interleaved(names.map((name) => numbers(`${name}.upper`))),
    status: Uint8Array.from(numbers("status")),
    claim: Uint8Array.from(numbers("claim")),
    rate,
    pushes: interleaved(claims.pushes.map((_, c) => numbers(`push ${c}`))),
    spreads: interleaved(claims.spreads.map((_, s) => numbers(`spread ${s}`))),
    authority: numbers("authority"),
  };
}
