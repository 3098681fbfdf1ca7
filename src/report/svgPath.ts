/** Coordinates of drawings: to a hundredth of a pixel, so that equal results give equal bytes. */
import { Markup } from "./markup.js";

export type Point = readonly [number, number];

export function pixel(value: number): string {
  return String(Math.round(100 * value) / 100);
}

export function polyline(points: readonly Point[]): Markup {
  return new Markup(`M${points.map(([x, y]) => `${pixel(x)} ${pixel(y)}`).join("L")}`);
}
