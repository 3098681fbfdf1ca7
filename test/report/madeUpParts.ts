/** Parts of made-up results. */
import type {
  CertificatePicture,
  CertificateSummary,
  LearningStep,
  Pictures,
  ResidualCurve,
} from "../../src/report/artifacts.js";

const TITLES: Readonly<Record<string, string>> = {
  learned: "learned metric, fitted model",
  constant: "best constant metric, fitted model",
  riccati: "Riccati metric at trim, fitted model",
  "constant-prior": "best constant metric, prior model",
  "riccati-prior": "Riccati metric at trim, prior model",
};

type Outcome =
  | {
      readonly margins: Readonly<Record<string, number>>;
      readonly authority: Readonly<Record<string, number>>;
      readonly rate: number;
    }
  | { readonly status: "fails" | "authorityExceeded" | "absent"; readonly reason: string };

export function certificate(name: string, outcome: Outcome): CertificateSummary {
  const holds = "margins" in outcome;
  return {
    name,
    title: TITLES[name]!,
    model: name.endsWith("prior") ? "prior" : "fitted",
    metric: name === "learned" ? "network" : "constant",
    status: holds ? "holds" : outcome.status,
    reason: holds ? "" : outcome.reason,
    evidence: "counted",
    rate: holds ? outcome.rate : null,
    worstRate: holds ? 1.37 * outcome.rate : { fails: -0.184213, authorityExceeded: 0.7, absent: null }[outcome.status],
    provedRate: null,
    provedShare: 0,
    failingShareUpper: holds ? 3.4533e-4 : null,
    counted: holds ? { points: 20_000, failures: 0, confidence: 0.999 } : null,
    margins: holds ? outcome.margins : {},
    authority: holds ? outcome.authority : {},
    tubeRadius: holds ? 0.0412 : null,
  };
}

export function picture(
  name: string,
  options: Partial<CertificatePicture> & { readonly worstRate: number; readonly margin: number },
): CertificatePicture {
  const { worstRate, margin, ...given } = options;
  return {
    name,
    rateMap: null,
    violations: [],
    tradeOff: Array.from({ length: 24 }, (_, i) => {
      const rate = (worstRate * (i + 1)) / 24;
      const radius = (0.0412 * 0.73 * worstRate) / rate;
      return {
        rate,
        radius,
        margin: (margin * radius) / 0.0412,
        authority: 0.08 + 0.09 / (1.0001 - rate / worstRate),
        room: 0.3,
      };
    }),
    authorityLimit: 0.4,
    footprint: null,
    ...given,
  };
}

/** Rates over a grid from a formula of the unit square. */
export function planeMap(
  x: [string, string, number, number],
  y: [string, string, number, number],
  rate: (a: number, b: number) => number,
): NonNullable<CertificatePicture["rateMap"]> {
  const axis = ([name, unit, low, high]: [string, string, number, number]) => ({
    name,
    unit,
    values: grid(41, low, high),
  });
  const parts = grid(41, 0, 1);
  return { x: axis(x), y: axis(y), rate: parts.map((b) => parts.map((a) => rate(a, b))) };
}

export function grid(count: number, low: number, high: number): number[] {
  return Array.from({ length: count }, (_, i) => low + ((high - low) * i) / (count - 1));
}

/** Deterministic numbers in [0, 1) that look scattered. */
function scatter(count: number, shift: number): number[] {
  return Array.from({ length: count }, (_, i) => ((i + shift) * 0.6180339887498949) % 1);
}

export function histogram(
  name: string,
  unit: string,
  low: number,
  high: number,
  emptyFrom = 24,
): Pictures["coverage"]["states"][number] {
  return {
    name,
    unit,
    edges: grid(25, low, high),
    counts: Array.from({ length: 24 }, (_, i) =>
      i >= emptyFrom ? 0 : Math.round(4000 * Math.exp(-(((i - 11) / 7) ** 2))),
    ),
    outside: emptyFrom < 24 ? 37 : 0,
  };
}

export function curve(title: string, unit: string, x: ResidualCurve["x"], term: (x: number) => number): ResidualCurve {
  const spread = scatter(60, 3);
  const [low, high] = [x.values[0]!, x.values.at(-1)!];
  return {
    title,
    unit,
    x,
    fitted: x.values.map(term),
    logged: scatter(60, 1).map((part, i) => {
      const at = low + (high - low) * part;
      return { x: at, y: term(at) * (0.9 + 0.2 * spread[i]!) };
    }),
  };
}

export function history(rounds: number, margin: number): LearningStep[] {
  return Array.from({ length: 60 }, (_, i) => ({
    round: 1 + Math.floor((i * rounds) / 60),
    step: 25 * i,
    shortfall: 0.9 * Math.exp(-i / 9) - 0.05 + (i % (60 / rounds) === 0 ? 0.12 : 0),
    margin: margin * (1 + 1.6 * Math.exp(-i / 14)),
    rate: 0.5 + i / 120,
  }));
}

export const SCORES = {
  calibration: scatter(20, 2).map((part) => 0.9 + 1.1 * part),
  test: scatter(12, 5).map((part) => 0.85 + 1.17 * part),
  bound: 1.94,
};
