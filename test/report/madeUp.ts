/** Made-up results in the shapes of three plants; nothing here was computed by the tool. */
import type { Pictures, Summary } from "../../src/report/artifacts.js";
import { certificate, curve, grid, histogram, history, picture, planeMap, SCORES } from "./madeUpParts.js";

export interface Results {
  readonly summary: Summary;
  readonly pictures: Pictures;
}

const COMMON = {
  assumptions: [
    "Continuous exact state feedback, until sampling, lag and estimate terms are added.",
    "Each disturbance channel keeps its sign within a window.",
    "New runs are drawn like the logged ones.",
  ],
  cautions: ["The new law changes which states are visited: calibrate again with runs under it."],
  engine: { name: "wasm", version: "4.22.0", rejected: [{ name: "native", reason: "the package is not installed" }] },
  seed: 1,
  seconds: { intake: 0.61, residual: 14.2, bound: 0.8, analytic: 9.7, metric: 31.3, certify: 12.9 },
} as const;

const ROVER_X: [string, string, number, number] = ["speed", "m/s", 0.6, 2.4];
const ROVER_Y: [string, string, number, number] = ["heading", "deg", -180, 180];

/** Planar goal; everything on the fitted model holds, one prior metric asks for too much, one is not found. */
export const ROVER: Results = {
  summary: {
    plant: "orchard-rover",
    description: "A rover that carries a sprayer between tree rows. The vehicle and its logs are invented.",
    verdict: {
      holds: true,
      text: "The learned metric contracts everywhere that was looked, and gives a margin smaller than every analytic one.",
    },
    states: [
      { name: "px", unit: "m" },
      { name: "py", unit: "m" },
      { name: "heading", unit: "deg" },
      { name: "speed", unit: "m/s" },
    ],
    inputs: [
      { name: "drive", unit: "m/s^2" },
      { name: "turn", unit: "rad/s" },
    ],
    goal: { name: "planar", unit: "m", direction: "any direction in the plane" },
    disturbance: {
      confidence: 0.9,
      calibrationRuns: 20,
      window: 0.5,
      channels: [
        { name: "slipAlong", unit: "m/s", bound: 0.041249, boundPrior: 0.0623 },
        { name: "slipAcross", unit: "m/s", bound: 0.0523, boundPrior: 0.0577 },
        { name: "turnDrift", unit: "rad/s", bound: 0.0213, boundPrior: 0.187 },
        { name: "speedPush", unit: "m/s^2", bound: 0.0871, boundPrior: 0.512 },
      ],
      testRuns: 12,
      testShareCovered: 11 / 12,
    },
    residual: {
      channels: [
        { name: "heading", unit: "deg/s", rmsePrior: 5.213, rmseFitted: 0.512 },
        { name: "speed", unit: "m/s^2", rmsePrior: 0.2231, rmseFitted: 0.0313 },
      ],
    },
    certificates: [
      certificate("learned", {
        rate: 0.812,
        margins: { px: 0.1432, py: 0.1432, heading: 4.31, speed: 0.121, planar: 0.1432, along: 0.1219, across: 0.1381 },
        authority: { drive: 0.31, turn: 0.39912 },
      }),
      certificate("constant", {
        rate: 0.551,
        margins: { px: 0.2541, py: 0.2541, heading: 6.2, speed: 0.152, planar: 0.2541, along: 0.201, across: 0.2502 },
        authority: { drive: 0.36, turn: 0.4 },
      }),
      certificate("riccati", {
        rate: 0.31,
        margins: { px: 0.4127, py: 0.4127, heading: 9.1, speed: 0.22, planar: 0.4127, along: 0.33, across: 0.4031 },
        authority: { drive: 0.29, turn: 0.38 },
      }),
      certificate("constant-prior", {
        status: "authorityExceeded",
        reason: "the least authority at any rate is 63 % of the half-range, the limit is 40 %",
      }),
      certificate("riccati-prior", {
        status: "absent",
        reason: "the Riccati equation has no stabilising solution at the trim point",
      }),
    ],
    envelope: {
      states: { heading: [-180, 180], speed: [0.6, 2.4], px: [-10, 10], py: [-10, 10] },
      inputs: { drive: [-1.5, 1.5], turn: [-0.9, 0.9] },
      plans: { states: { speed: [0.721, 2.279] }, inputs: { drive: [-1.035, 1.035], turn: [-0.541, 0.541] } },
    },
    unsupportedShare: 0.042,
    ...COMMON,
  },
  pictures: {
    coverage: {
      states: [histogram("heading", "deg", -180, 180), histogram("speed", "m/s", 0.6, 2.4, 21)],
      runs: { fit: 32, calibration: 20, test: 12 },
      findings: ["run 14: 3 samples out of time order were dropped", "run 40: a gap of 1.2 s was cut"],
    },
    residual: [
      curve(
        "added to the rate of speed",
        "m/s^2",
        { name: "speed", unit: "m/s", values: grid(41, 0.6, 2.4) },
        (v) => -0.05 - 0.08 * v * v,
      ),
      curve(
        "gain of turn in heading",
        "1",
        { name: "speed", unit: "m/s", values: grid(41, 0.6, 2.4) },
        (v) => -0.04 - 0.1 * v,
      ),
    ],
    residualHistory: Array.from({ length: 40 }, (_, i) => ({
      step: 40 * i,
      train: 0.02 + Math.exp(-i / 5),
      validation: 0.026 + 1.1 * Math.exp(-i / 5),
    })),
    scores: SCORES,
    learning: history(5, 0.14),
    certificates: [
      picture("learned", {
        worstRate: 1.11,
        margin: 0.1432,
        footprint: [0.0148, 0, 0.0191],
        rateMap: planeMap(ROVER_X, ROVER_Y, (a) => 1.12 + 0.5 * a),
      }),
      picture("constant", {
        worstRate: 0.75,
        margin: 0.2541,
        footprint: [0.04, 0.004, 0.0601],
        rateMap: planeMap(ROVER_X, ROVER_Y, (a) => 0.76 + 0.3 * a),
      }),
      picture("riccati", {
        worstRate: 0.42,
        margin: 0.4127,
        footprint: [0.1, 0, 0.162],
        rateMap: planeMap(ROVER_X, ROVER_Y, (a) => 0.43 + 1.1 * a),
      }),
      {
        ...picture("constant-prior", {
          worstRate: 0.7,
          margin: 0.6,
          rateMap: planeMap(ROVER_X, ROVER_Y, (a) => 0.7 + 0.2 * a),
        }),
        tradeOff: picture("x", { worstRate: 0.7, margin: 0.6 }).tradeOff.map((point) => ({
          ...point,
          authority: point.authority + 0.55,
        })),
      },
      picture("riccati-prior", { worstRate: 1, margin: 1, tradeOff: [] }),
    ],
  },
};

const CRANE_X: [string, string, number, number] = ["sway", "rad", -0.35, 0.35];
const CRANE_Y: [string, string, number, number] = ["swayRate", "rad/s", -0.3, 0.3];

/** State goal without a rotation; all but the learned certificate fail. */
export const CRANE: Results = {
  summary: {
    ...ROVER.summary,
    plant: "yard-crane",
    description: "A trolley with a hook on ropes. The machine and its logs are invented.",
    verdict: { holds: true, text: "The learned metric holds; no analytic metric does." },
    states: [
      { name: "trolley", unit: "m" },
      { name: "trolleySpeed", unit: "m/s" },
      { name: "sway", unit: "rad" },
      { name: "swayRate", unit: "rad/s" },
    ],
    inputs: [{ name: "accel", unit: "m/s^2" }],
    goal: { name: "trolley", unit: "m", direction: "trolley" },
    disturbance: {
      ...ROVER.summary.disturbance,
      channels: [
        { name: "driveError", unit: "m/s^2", bound: 0.031, boundPrior: 0.033 },
        { name: "windPush", unit: "rad/s^2", bound: 0.0082, boundPrior: 0.0561 },
      ],
    },
    residual: { channels: [{ name: "swayRate", unit: "rad/s^2", rmsePrior: 0.0312, rmseFitted: 0.0041 }] },
    certificates: [
      certificate("learned", {
        rate: 0.44,
        margins: { trolley: 0.3321, trolleySpeed: 0.21, sway: 0.061, swayRate: 0.058 },
        authority: { accel: 0.3994 },
      }),
      certificate("constant", { status: "fails", reason: "the rate is -0.184 1/s at sway 0.35 rad" }),
      certificate("riccati", { status: "fails", reason: "the rate is -0.184 1/s at sway -0.35 rad" }),
      certificate("constant-prior", { status: "fails", reason: "the rate is -0.184 1/s at sway 0.31 rad" }),
      certificate("riccati-prior", { status: "fails", reason: "the rate is -0.184 1/s at sway 0.30 rad" }),
    ],
    envelope: {
      states: { trolley: [5, 25], trolleySpeed: [-1.5, 1.5], sway: [-0.35, 0.35], swayRate: [-0.3, 0.3] },
      inputs: { accel: [-0.8, 0.8] },
      plans: {
        states: {
          trolley: [5.34, 24.66],
          trolleySpeed: [-1.29, 1.29],
          sway: [-0.289, 0.289],
          swayRate: [-0.242, 0.242],
        },
        inputs: { accel: [-0.48, 0.48] },
      },
    },
    unsupportedShare: 0,
  },
  pictures: {
    ...ROVER.pictures,
    coverage: {
      states: [
        histogram("trolleySpeed", "m/s", -1.5, 1.5),
        histogram("sway", "rad", -0.35, 0.35, 20),
        histogram("swayRate", "rad/s", -0.3, 0.3),
      ],
      runs: { fit: 30, calibration: 20, test: 12 },
      findings: [],
    },
    residual: [
      curve(
        "added to the rate of swayRate",
        "rad/s^2",
        { name: "swayRate", unit: "rad/s", values: grid(41, -0.3, 0.3) },
        (v) => -0.2 * v,
      ),
    ],
    learning: history(4, 0.33),
    certificates: [
      picture("learned", {
        worstRate: 0.6,
        margin: 0.3321,
        rateMap: planeMap(CRANE_X, CRANE_Y, (a, b) => 0.62 + 0.5 * Math.abs(a - 0.5) + 0.1 * b),
      }),
      ...["constant", "riccati", "constant-prior", "riccati-prior"].map((name, i) =>
        picture(name, {
          worstRate: 1,
          margin: 1,
          tradeOff: [],
          rateMap: planeMap(CRANE_X, CRANE_Y, (a, b) => 0.9 - (3 + 0.4 * i) * (a - 0.5) ** 2 - 1.6 * (b - 0.5) ** 2),
          violations: [
            { x: 0.35, y: 0.3, rate: -0.184 },
            { x: -0.33, y: -0.29, rate: -0.16 },
            { x: 0.34, y: -0.21, rate: -0.11 },
          ],
        }),
      ),
    ],
  },
};

/** The learned certificate fails, the constant metric holds. */
export const BOAT: Results = {
  summary: {
    ...ROVER.summary,
    plant: "survey-boat",
    description: "A small survey vessel that nothing pushes sideways. The vessel and its logs are invented.",
    verdict: { holds: false, text: "The learned metric fails at slow surge and full sway, so it gives no margin." },
    goal: { name: "across", unit: "m", direction: "across the planned heading" },
    certificates: [
      certificate("learned", { status: "fails", reason: "the rate is -0.184 1/s at surge 0.6 m/s, sway 0.35 m/s" }),
      certificate("constant", {
        rate: 0.2,
        margins: { px: 0.231, py: 0.231, heading: 5.2, speed: 0.1, planar: 0.231, along: 0.171, across: 0.2071 },
        authority: { drive: 0.22, turn: 0.4 },
      }),
    ],
  },
  pictures: {
    ...ROVER.pictures,
    certificates: [
      picture("learned", {
        worstRate: 1,
        margin: 1,
        tradeOff: [],
        rateMap: planeMap(
          ["surge", "m/s", 0.6, 2],
          ["sway", "m/s", -0.35, 0.35],
          (a, b) => 0.5 * a + 0.4 - 0.9 * Math.abs(b - 0.5),
        ),
        violations: Array.from({ length: 340 }, (_, i) => ({
          x: 0.6 + 0.0001 * i,
          y: 0.35 - 0.0001 * i,
          rate: -0.18 + 0.0005 * i,
        })),
      }),
      picture("constant", {
        worstRate: 0.3,
        margin: 0.2071,
        footprint: [0.029, 0, 0.0428],
        rateMap: planeMap(["surge", "m/s", 0.6, 2], ["sway", "m/s", -0.35, 0.35], (a) => 0.31 + 0.05 * a),
      }),
    ],
  },
};

/** One certificate, one coordinate, no histories, nulls wherever they are allowed. */
export const BARE: Results = {
  summary: {
    ...CRANE.summary,
    plant: "hoist",
    certificates: [
      {
        ...CRANE.summary.certificates[0]!,
        failingShareUpper: null,
        counted: null,
        worstRate: null,
        authority: {},
        evidence: "sampled",
      },
    ],
    disturbance: { ...CRANE.summary.disturbance, channels: [], testRuns: 0, testShareCovered: 0 },
    residual: { channels: [] },
    assumptions: [],
    cautions: [],
    engine: { name: "cpu", version: "4.22.0", rejected: [] },
    seconds: {},
  },
  pictures: {
    coverage: {
      states: [{ name: "sway", unit: "rad", edges: [-1, 0, 1], counts: [0, 0], outside: 0 }],
      runs: { fit: 0, calibration: 0, test: 0 },
      findings: [],
    },
    residual: [],
    residualHistory: [],
    scores: { calibration: [], test: [], bound: 0 },
    learning: [],
    certificates: [
      {
        ...picture("learned", { worstRate: 0.6, margin: 0.33 }),
        rateMap: {
          x: { name: "sway", unit: "rad", values: grid(21, -0.35, 0.35) },
          y: null,
          rate: [grid(21, 0.2, 0.9)],
        },
      },
    ],
  },
};

/** Nothing holds. */
export const NOTHING: Results = {
  summary: {
    ...CRANE.summary,
    verdict: { holds: false, text: "No metric holds on this envelope." },
    certificates: CRANE.summary.certificates.map(({ name }) =>
      certificate(name, {
        status: name === "riccati" ? "absent" : "fails",
        reason: "the rate is negative <at> \"speed\" & 'sway'",
      }),
    ),
    envelope: { ...CRANE.summary.envelope, plans: null },
  },
  pictures: {
    ...CRANE.pictures,
    certificates: CRANE.summary.certificates.map(({ name }) =>
      picture(name, { worstRate: 1, margin: 1, tradeOff: [] }),
    ),
  },
};
