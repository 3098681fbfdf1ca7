/**
 * A rate of its own for a plan: the cells around it may contract faster than the worst of the envelope. One rate is kept all
 * along the plan, so the tube is planTube.ts's with that rate; the authority at it is proved again on every touched cell,
 * which shows as well that the cell contracts at it (rho is finite). Faster is narrower: the fastest rate is looked for that
 * gives numbers for the whole plan within the authority limit.
 */
import { type PlanTube, type PlanTubeRequest, planTube } from "../tube/planTube.js";
import { steadyRadius } from "../tube/tube.js";
import type { PlanCells } from "./planCells.js";

export interface PlanLaw {
  readonly rate: number;
  readonly laid: PlanTube;
}

const HALVINGS = 5;
/** The law's rate stays this share below the slowest rate proved around the plan, where rho has no bound. */
const BELOW = 1 / 64;

/** base: the tube at the fixed rate, which is what comes back when no faster one is found or the base has an end. */
export function fastestLaw(
  request: Omit<PlanTubeRequest, "local">,
  base: PlanTube,
  cells: PlanCells,
  authorityLimit: number,
  progress: (done: number, total: number, note: string) => void,
): PlanLaw {
  let best: PlanLaw = { rate: request.rate, laid: base };
  if (base.end !== null || base.steps.length === 0) return best;
  const slowest = Math.min(...base.steps.map(({ bounds }) => bounds.rate), 16 * request.rate);
  const widest = Math.max(...base.steps.map(({ radius }) => radius));
  const atRest = (rate: number): number => steadyRadius({ window: request.window, sigma: 1 }, rate);
  let refused = slowest * (1 - BELOW);
  for (let i = 0; i < HALVINGS && refused > best.rate; i++) {
    // the fastest first: nothing is to be halved when it passes
    const rate = i === 0 ? refused : (best.rate + refused) / 2;
    progress(i, HALVINGS, `authority at ${rate.toPrecision(3)} 1/s`);
    const radius = (widest * atRest(rate)) / atRest(request.rate);
    const laid = planTube({ ...request, rate, local: cells.localAt(rate, (2 * authorityLimit) / radius) });
    const isAllowed = laid.end === null && laid.steps.every(({ authority }) => authority <= authorityLimit);
    if (isAllowed) best = { rate, laid };
    else refused = rate;
  }
  return best;
}
