// The summary's words and numbers on made-up evidence: nothing is claimed that the evidence does not carry.
import { describe, expect, it } from "vitest";
import type { BoundFile, FitFile, IntakeFile } from "../../src/pipeline/artifacts.js";
import type { CertificateFile, ProofFile } from "../../src/pipeline/certificate.js";
import { marginsOf, summaryOf } from "../../src/pipeline/summaryOf.js";
import type { Plant } from "../../src/plant/plant.js";
import type { CertificateSummary, Summary } from "../../src/report/artifacts.js";
import { summarySchema } from "../../src/report/summarySchema.js";
import type { RateChoice } from "../../src/tube/chooseRate.js";
import { ROVER } from "../plant/examples.js";
import { changed, plantOf } from "../plant/reading.js";

const PLANT = plantOf(ROVER);

const INTAKE: IntakeFile = {
  files: [{ path: "/fields/log.arrow", rows: 100, runs: 40 }],
  findings: [],
  sampleInterval: 0.05,
  jitter: 0,
  runs: { fit: 20, calibration: 12, test: 8 },
  coverage: [],
  unsupportedShare: 0,
};
const FIT: FitFile = {
  status: "improved",
  bestStep: 10,
  trainingRuns: 16,
  validationRuns: 4,
  history: [],
  window: 0.5,
  channels: [],
  curves: [],
  slopes: [],
};
const BOUND: BoundFile = {
  confidence: 0.9,
  calibrationRuns: 12,
  rank: 12,
  window: 1,
  bounds: { fitted: [0.01, 0.02, 0.03, 0.04], prior: [0.1, 0.2, 0.3, 0.4] },
  quantile: 1,
  scale: [0.01, 0.02, 0.03, 0.04],
  heldOut: [],
  calibrationScores: [1],
  testScores: [0.5],
  testShareCovered: 1,
};

const POINT = { rate: 1, radius: 0.1, margin: 0.02, authority: 0.3, room: 0.2 };
const CHOSEN: RateChoice = { status: "chosen", point: POINT, curve: [POINT] };
// radius 0.1; spreads of px, py, heading, speed, then planar, along, across
const SPREADS = [0.04, 0.04, 0.01, 4, 0.04, 0.05, 0.06];
const DIRECTIONS = [
  ...[0, 1, 2, 3].map((state) => ({ kind: "state" as const, state })),
  { kind: "planar" as const },
  { kind: "along" as const, headingError: 0.1 },
  { kind: "across" as const, headingError: 0.1 },
];
const TUBE = {
  rate: 1,
  claimedRate: 1.2,
  radius: 0.1,
  pushes: [0.02, 0.03, 0.03, 0.02],
  sigma: 0.1,
  authority: 0.3,
  authorityDensity: 6,
  spreads: DIRECTIONS.map((direction, i) => ({ direction, value: SPREADS[i]! })),
  headingError: 0.1,
};
const PROVED: ProofFile = {
  status: "proved",
  provedRate: 1.2,
  provedShare: 1,
  refutedShare: 0,
  openShare: 0,
  boxes: 21,
  leaves: 11,
  stoppedBy: [],
  refutedAt: null,
  claims: { rate: 1.2, pushes: [], spreads: [], authority: null },
};
const OPEN: ProofFile = {
  ...PROVED,
  status: "open",
  provedShare: 0.75,
  openShare: 0.25,
  boxes: 120_000,
  stoppedBy: ["authority", "rate"],
};
const REFUTED: ProofFile = { ...PROVED, status: "refuted", provedShare: 0.9, refutedShare: 0.1, refutedAt: [-0.5] };

type Evidence = NonNullable<CertificateFile["evidence"]>;
const EVIDENCE: Evidence = {
  worstRate: 1.21,
  worstState: [-1],
  choice: CHOSEN,
  tube: TUBE,
  counted: {
    points: 20_000,
    failures: 0,
    confidence: 0.999,
    failingShareUpper: 3.5e-4,
    firstFailure: null,
  } as Evidence["counted"],
  allowance: 0.01,
  proof: PROVED,
};

function summaryWith(
  evidence: Partial<Evidence> | null,
  { plant = PLANT, intake = INTAKE }: { plant?: Plant; intake?: IntakeFile } = {},
): { summary: Summary; learned: CertificateSummary } {
  const summary = summaryOf({
    plant,
    intake,
    fit: FIT,
    bound: BOUND,
    certificates: [
      { name: "learned", note: "round 2 of 2", evidence: evidence === null ? null : { ...EVIDENCE, ...evidence } },
      { name: "riccati", note: "no stabilising solution", evidence: null },
    ],
    engine: { name: "wasm", version: "1", rejected: [] },
    seed: 1,
    seconds: {},
  });
  const checked = summarySchema.safeParse(summary);
  expect(checked.success, String(checked.error)).toBe(true);
  return { summary, learned: summary.certificates.find(({ name }) => name === "learned")! };
}

const NO_NUMBER = { rate: null, margins: {}, authority: {}, tubeRadius: null, provedRate: null };

describe("summaryOf", () => {
  it("proved: margins by hand, plans in the envelope less margins and authority", () => {
    const { summary, learned } = summaryWith({});
    expect(learned).toMatchObject({ status: "holds", evidence: "proved", provedShare: 1, rate: 1 });
    // margin = radius sqrt(spread) half-range: 30 m, 180 deg, 0.9 m/s
    const expected = {
      px: 0.6,
      py: 0.6,
      heading: 1.8,
      speed: 0.18,
      planar: 0.6,
      along: 3 * 0.05 ** 0.5,
      across: 3 * 0.06 ** 0.5,
    };
    expect(Object.keys(learned.margins).sort()).toEqual(Object.keys(expected).sort());
    for (const [name, margin] of Object.entries(expected)) expect(learned.margins[name], name).toBeCloseTo(margin, 12);
    expect(learned.margins).toEqual(marginsOf(PLANT, TUBE));
    const { plans } = summary.envelope;
    expect(Object.keys(plans!.states)).toEqual(["speed"]);
    expect(plans!.states.speed![0]).toBeCloseTo(0.78, 12);
    expect(plans!.states.speed![1]).toBeCloseTo(2.22, 12);
    expect(plans!.inputs.drive![1]).toBeCloseTo(1.5 * 0.7, 12);
    expect(plans!.inputs.turn![0]).toBeCloseTo(-0.6 * 0.7, 12);
    expect(summary.verdict.holds).toBe(true);
    expect(summary.verdict.text).toMatch(/0\.6\d* m of the plan, any direction in the plane \(proved\)/);
  });

  it("no room left for plans: no box of plans", () => {
    const spreads = TUBE.spreads.map((spread) => ({ ...spread, value: 100 }));
    expect(summaryWith({ tube: { ...TUBE, spreads } }).summary.envelope.plans).toBeNull();
  });

  it("an open proof says what is open, and the evidence is the count", () => {
    const { summary, learned } = summaryWith({ proof: OPEN });
    expect(learned).toMatchObject({ status: "holds", evidence: "counted", provedShare: 0.75 });
    expect(learned.reason).toMatch(/25\.0 % of the envelope is still open after 120000 boxes.*'authority'/);
    expect(summary.verdict.text).toContain("(counted)");
    expect(summary.verdict.text).not.toContain("proved");
    expect(summaryWith({ proof: OPEN, counted: null }).learned.evidence).toBe("sampled");
  });

  it("a refuted proof gives no number, but the state", () => {
    const { summary, learned } = summaryWith({ proof: REFUTED });
    expect(learned).toMatchObject({ status: "fails", ...NO_NUMBER });
    // speed at scaled -0.5 of [0.6, 2.4]
    expect(learned.reason).toMatch(/a claim fails at speed 1\.05 m\/s/);
    expect(summary.verdict).toMatchObject({ holds: false });
    expect(summary.verdict.text).toContain("gives no margin");
    expect(summary.envelope.plans).toBeNull();
  });

  it("a failure in the count gives no number, proved or not", () => {
    for (const proof of [PROVED, OPEN]) {
      const { summary, learned } = summaryWith({ proof, counted: { ...EVIDENCE.counted!, failures: 1 } });
      expect(learned).toMatchObject({ status: "fails", ...NO_NUMBER });
      expect(learned.reason).toContain("at a random point of the count");
      expect(summary.verdict.holds).toBe(false);
    }
  });

  it("states without logs refuse the verdict, unless accepted", () => {
    const intake = { ...INTAKE, unsupportedShare: 0.125 };
    const refused = summaryWith({}, { intake }).summary;
    expect(refused.verdict.holds).toBe(false);
    expect(refused.verdict.text).toMatch(/no states in 12\.5 % of the envelope.*unsupported: accept/s);
    const plant = plantOf(changed(ROVER, ["unsupported: refuse", "unsupported: accept"]));
    const accepted = summaryWith({}, { intake, plant }).summary;
    expect(accepted.verdict.holds).toBe(true);
    expect(accepted.cautions.join(" ")).toContain("12.5 % of the envelope");
  });

  const least = { ...POINT, authority: 0.631, room: 0.77 };
  const asked = plantOf(changed(ROVER, ["rate: auto", "rate: 7"]));

  it("authority: the least share that it takes and the limit; at the asked rate where one is asked", () => {
    const choice: RateChoice = { status: "authorityExceeded", least, curve: [least] };
    const { learned, summary } = summaryWith({ tube: null, counted: null, proof: null, choice });
    expect(learned).toMatchObject({ status: "authorityExceeded", evidence: "sampled", ...NO_NUMBER });
    expect(learned.reason).toMatch(/at least 63\.1 %.*limit is 40\.0 %/);
    expect(summary.verdict.text).toContain("63.1 %");
    const { learned: at } = summaryWith({ tube: null, counted: null, proof: null, choice }, { plant: asked });
    expect(at.reason).toMatch(/at the asked rate of 7 1\/s.*63\.1 %.*40\.0 %/);
  });

  it("room: the share and the limit", () => {
    const choice: RateChoice = { status: "roomExceeded", least, curve: [least] };
    const { learned } = summaryWith({ tube: null, counted: null, proof: null, choice });
    expect(learned).toMatchObject({ status: "roomExceeded", ...NO_NUMBER });
    expect(learned.reason).toMatch(/77\.0 %.*limit is 50\.0 %/);
  });

  it("no rate: the worst one and where; the asked one where it is above", () => {
    const none = { tube: null, counted: null, proof: null };
    const failing = summaryWith({ ...none, worstRate: -0.3, choice: { status: "noRate", curve: [] } }).learned;
    expect(failing).toMatchObject({ status: "fails", worstRate: -0.3, ...NO_NUMBER });
    expect(failing.reason).toMatch(/-0\.300 1\/s at speed 0\.6 m\/s$/);
    const above = summaryWith({ ...none, choice: { status: "noRate", curve: [POINT] } }, { plant: asked }).learned;
    expect(above.reason).toMatch(/its rate is 1\.21 1\/s.*7 1\/s was asked for/);
    const unbounded = { ...none, worstRate: null };
    const fast = summaryWith({ ...unbounded, choice: { status: "noRate", curve: [POINT] } }, { plant: asked }).learned;
    expect(fast.reason).toMatch(/7 1\/s was asked for; no rate that fast/);
    expect(summaryWith({ ...unbounded, choice: { status: "noRate", curve: [] } }).learned.reason).toContain(
      "not positive definite at speed 0.6 m/s",
    );
  });

  it("no metric: absent with its note", () => {
    const { learned, summary } = summaryWith(null);
    expect(learned).toMatchObject({ status: "absent", reason: "round 2 of 2", worstRate: null, ...NO_NUMBER });
    expect(summary.verdict.holds).toBe(false);
  });

  it("bounds in the plant's units", () => {
    const { channels } = summaryWith({}).summary.disturbance;
    expect(channels.map(({ name, bound, boundPrior }) => [name, bound, boundPrior])).toEqual([
      ["slipAlong", 0.01, 0.1],
      ["slipAcross", 0.02, 0.2],
      ["turnDrift", 0.03, 0.3],
      ["speedPush", 0.04, 0.4],
    ]);
  });
});
