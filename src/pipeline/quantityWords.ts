/** A state's value in words: name, number, unit. */
import type { StateSpec } from "../plant/plant.js";

/** value in SI. */
export function quantityIn({ name, unit }: Pick<StateSpec, "name" | "unit">, value: number): string {
  return `${name} ${Number((value / unit.factor).toPrecision(3))} ${unit.name}`;
}
