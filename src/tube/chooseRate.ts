/**
 * The contraction rate that a tube is built at: below the certificate's worst rate the margin falls with the rate and
 * the authority, infinite at the worst rate, limits it. The whole trade-off is kept for the reader.
 */
import { type TubeDisturbance, tubeRadius } from "./tube.js";

/** What a verified certificate tells a tube: suprema over the claimed envelope, each an upper bound in its evidence. */
export interface CertificateExtremes {
  /** The slowest pointwise rate, 1/s; a tube's own rate is strictly below. 0 or less: the certificate fails. */
  readonly usableRate: number;
  readonly sigma: number;
  /** sup of the authority density at a rate. */
  readonly authorityDensity: (rate: number) => number;
  /** sup of c^T W c for the asked margin, given the tube's radius (a heading error widens along and across). */
  readonly goalSpread: (radius: number) => number;
  /** sup of W_ii over the active states; 0 where there is none. */
  readonly widestSpread: number;
}

export interface TradeOffPoint {
  /** 1/s. */
  readonly rate: number;
  readonly radius: number;
  /** The asked margin in scaled units. */
  readonly margin: number;
  /** Share of the inputs' half-range. */
  readonly authority: number;
  /** Largest share of an active state's half-range that its margin takes from plans. */
  readonly room: number;
}

export type RateChoice =
  | { readonly status: "chosen"; readonly point: TradeOffPoint; readonly curve: readonly TradeOffPoint[] }
  /** The certificate contracts nowhere: no tube. */
  | { readonly status: "noRate"; readonly curve: readonly TradeOffPoint[] }
  /** No rate keeps the authority within the limit; `least` is the rate that needs least. */
  | { readonly status: "authorityExceeded"; readonly least: TradeOffPoint; readonly curve: readonly TradeOffPoint[] }
  /** No rate within the authority limit leaves plans their room; `least` takes least. */
  | { readonly status: "roomExceeded"; readonly least: TradeOffPoint; readonly curve: readonly TradeOffPoint[] };

export interface TubeRequest {
  readonly window: number;
  readonly initialDistance: number;
  readonly authorityLimit: number;
  readonly roomLimit: number;
  /** A rate that the user insists on, 1/s. */
  readonly rate: number | null;
}

const CURVE_POINTS = 24;
const BISECTIONS = 12;
/** A tube's rate is below the usable one by at least this share: the authority is infinite at it. */
const STRICTLY = 0.01;

export function chooseRate(extremes: CertificateExtremes, request: TubeRequest): RateChoice {
  if (!(extremes.usableRate > 0)) return { status: "noRate", curve: [] };
  const pointAt = (rate: number): TradeOffPoint => tradeOffAt(rate, extremes, request);
  const fastestRate = Number.isFinite(extremes.usableRate)
    ? (1 - STRICTLY) * extremes.usableRate
    : firstRateOverLimit(pointAt, request.authorityLimit);
  const curve = Array.from({ length: CURVE_POINTS }, (_, i) => pointAt((fastestRate * (i + 1)) / CURVE_POINTS));
  const isWithinAuthority = (point: TradeOffPoint): boolean => point.authority <= request.authorityLimit;
  const isAllowed = (point: TradeOffPoint): boolean => isWithinAuthority(point) && point.room <= request.roomLimit;
  if (request.rate !== null) {
    if (request.rate > fastestRate) return { status: "noRate", curve };
    const point = pointAt(request.rate);
    if (isAllowed(point)) return { status: "chosen", point, curve };
    return { status: isWithinAuthority(point) ? "roomExceeded" : "authorityExceeded", least: point, curve };
  }
  const fastest = curve.findLastIndex(isAllowed);
  if (fastest < 0) {
    const affordable = curve.filter(isWithinAuthority);
    if (affordable.length > 0) {
      const least = affordable.reduce((a, b) => (b.room < a.room ? b : a));
      return { status: "roomExceeded", least, curve };
    }
    const least = curve.reduce((a, b) => (b.authority < a.authority ? b : a));
    return { status: "authorityExceeded", least, curve };
  }
  let point = curve[fastest]!;
  let refused = curve[fastest + 1]?.rate ?? point.rate;
  for (let i = 0; i < BISECTIONS && refused > point.rate; i++) {
    const middle = pointAt((point.rate + refused) / 2);
    if (isAllowed(middle)) point = middle;
    else refused = middle.rate;
  }
  return { status: "chosen", point, curve };
}

/** Every state is actuated, so every rate is usable: doubling from 1/s until the authority, which grows without end, is over its limit. */
function firstRateOverLimit(pointAt: (rate: number) => TradeOffPoint, limit: number): number {
  let rate = 1;
  while (pointAt(rate).authority <= limit && rate < 1e6) rate *= 2;
  return rate;
}

function tradeOffAt(rate: number, extremes: CertificateExtremes, request: TubeRequest): TradeOffPoint {
  const disturbance: TubeDisturbance = { window: request.window, sigma: extremes.sigma };
  const radius = tubeRadius(disturbance, rate, request.initialDistance);
  return {
    rate,
    radius,
    margin: radius * Math.sqrt(extremes.goalSpread(radius)),
    authority: (radius * extremes.authorityDensity(rate)) / 2,
    room: radius * Math.sqrt(extremes.widestSpread),
  };
}
