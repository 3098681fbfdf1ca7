/**
 * The tube and what it costs. Distance d in the metric obeys d' <= -lambda d + sigma(t). The disturbance is bounded in
 * the mean over windows of length T, each channel keeping its sign within a window, so the worst case is all of a
 * window's push at its end:
 *   R(t)  = e^{-lambda t} R0 + T sigma (1 - e^{-lambda T ceil(t/T)}) / (1 - e^{-lambda T})
 *   R_inf = T sigma / (1 - e^{-lambda T})          (-> sigma / lambda as T -> 0)
 * R jumps at the windows' ends and is monotone over them, so its supremum is max(R0 + T sigma, R_inf), at the first or in
 * the long run. Margins use it: margin of c^T x = R sqrt(sup c^T W c); authority = 1/2 R sup density, in shares of the
 * inputs' half-range. Scaled states are unitless, so R is too. Source: Gronwall's comparison on the Riemannian distance
 * (Manchester and Slotine, IEEE TAC 62(5), 2017, section III), summed over windows.
 */
export interface TubeDisturbance {
  /** Window length T, s; 0 for a bound that holds at every instant. */
  readonly window: number;
  /**
   * sum_i wbar_i sup_x sqrt(g_i^T M g_i), 1/s. With windows the supremum of the sum is not enough: each channel may spend
   * its window where it pushes most.
   */
  readonly sigma: number;
}

export function steadyRadius({ window, sigma }: TubeDisturbance, rate: number): number {
  return window === 0 ? sigma / rate : (window * sigma) / -Math.expm1(-rate * window);
}

/** R(t) from R(0) = initialDistance. */
export function radiusAt(time: number, disturbance: TubeDisturbance, rate: number, initialDistance: number): number {
  const { window } = disturbance;
  const elapsed = window === 0 ? time : window * Math.ceil(time / window);
  return Math.exp(-rate * time) * initialDistance - steadyRadius(disturbance, rate) * Math.expm1(-rate * elapsed);
}

/** The radius that margins use. */
export function tubeRadius(disturbance: TubeDisturbance, rate: number, initialDistance: number): number {
  const first = initialDistance + disturbance.window * disturbance.sigma;
  return Math.max(first, steadyRadius(disturbance, rate));
}
