/** Scan points of the box [-1, 1]^d: its centre and corners, then Sobol points; flat, count x d. */
import { sobolPoints } from "../num/sobol.js";
import { inputCorners } from "./corners.js";

export function scanPoints(dimension: number, sobolCount: number): Float64Array {
  if (dimension === 0) return new Float64Array(0);
  const corners = dimension <= 10 ? inputCorners(dimension) : [];
  const sobol = sobolPoints(dimension, sobolCount, 1);
  const out = new Float64Array((1 + corners.length + sobolCount) * dimension);
  for (const [c, corner] of corners.entries()) out.set(corner, (1 + c) * dimension);
  const from = (1 + corners.length) * dimension;
  for (let i = 0; i < sobol.length; i++) out[from + i] = 2 * sobol[i]! - 1;
  return out;
}
