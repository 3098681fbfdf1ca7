/** The bound of every leftover channel, of the fitted and of the prior model. */
import type { Summary } from "./artifacts.js";
import { duration, number, plural, share } from "./format.js";
import { type Markup, markup } from "./markup.js";

export function disturbanceTable({ disturbance, unsupportedShare }: Summary): Markup {
  const { channels, confidence, calibrationRuns, window } = disturbance;
  const rows = channels.map(
    ({ name, unit, bound, boundPrior }) =>
      markup`<tr><th scope="row">${name}</th><td data-label="Unit">${unit}</td><td class="number" data-label="Fitted model">${number(bound, "up")}</td><td class="number" data-label="Prior model">${number(boundPrior, "up")}</td><td class="number" data-label="Fitted of prior">${boundPrior > 0 ? share(bound / boundPrior) : "none"}</td></tr>`,
  );
  return markup`<p>The bound is on the mean over windows of ${duration(window)}, all channels at once, from ${plural(calibrationRuns, "calibration run")} by split conformal prediction: with at least ${share(confidence, "down")} probability over the draw of the runs, a new run of the same kind stays under it throughout. A push that changes its sign within a window is not covered. ${unsupportedShare > 0 ? `The logs hold no states in ${share(unsupportedShare, "up")} of the envelope; there the model is a guess.` : "The logs hold states in every part of the envelope that was checked."}</p>
${channels.length === 0 ? markup`<p class="note">The plant declares no leftover channel.</p>` : markup`<div class="wide"><table class="stacks"><caption>Bound of the leftover by channel</caption><thead><tr><th scope="col">Channel</th><th scope="col">Unit</th><th scope="col" class="number">Fitted model</th><th scope="col" class="number">Prior model</th><th scope="col" class="number">Fitted of prior</th></tr></thead><tbody>${rows}</tbody></table></div>`}`;
}
