/**
 * The window of the disturbance bound, chosen on the fit runs alone: a short window drowns in sensor noise, a long one
 * costs the tube the factor lambda T / (1 - e^{-lambda T}). Of a fixed grid, the window with the least mean over the
 * channels of (mean peak of a run) times that factor at a reference rate; windows longer than every run are left out.
 * The choice moves tightness only, never validity: calibration runs have no part in it.
 */
import type { Run } from "../logs/recording.js";
import type { ControlAffineModel } from "../model/controlAffine.js";
import type { Scaling } from "../plant/scaling.js";
import { channelScales, runPeaks } from "./disturbanceBound.js";

/** s. */
export const WINDOW_GRID: readonly number[] = [0.1, 0.2, 0.3, 0.4, 0.5, 0.7, 1];
/** 1/s; of the order of vehicles' tracking loops. */
export const REFERENCE_RATE = 1;

/** s; the shortest of the grid when no run holds any of them. */
export function chooseWindow(model: ControlAffineModel, scaling: Scaling, fit: readonly Run[]): number {
  const candidates = WINDOW_GRID.flatMap((window) => {
    const factor = (REFERENCE_RATE * window) / -Math.expm1(-REFERENCE_RATE * window);
    const scales = channelScales(fit.map((run) => runPeaks(model, scaling, run, window)));
    return scales.length === 0 ? [] : [{ window, costs: scales.map((scale) => scale * factor) }];
  });
  const least = (c: number): number => Math.min(...candidates.map(({ costs }) => costs[c]!));
  const relative = candidates.map(({ costs }) => costs.reduce((sum, cost, c) => sum + cost / least(c), 0));
  return candidates[relative.indexOf(Math.min(...relative))]?.window ?? WINDOW_GRID[0]!;
}
