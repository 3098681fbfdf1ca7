/** summary.json from what the stages saved: everything in the plant's units, and the verdict in words. */
import type { Plant } from "../plant/plant.js";
import { activeStates, plantScaling } from "../plant/scaling.js";
import type { CertificateSummary, NamedUnit, Summary } from "../report/artifacts.js";
import type { RateChoice } from "../tube/chooseRate.js";
import { marginOf, shrunk } from "../tube/margins.js";
import { type BoundFile, CERTIFICATE_KINDS, type CertificateKind, type FitFile, type IntakeFile } from "./artifacts.js";
import type { CertificateFile, ProofFile } from "./certificate.js";
import { goalState, halfRange } from "./certificatePicture.js";
import type { CertifiedTube } from "./certifyMetric.js";
import { quantityIn } from "./quantityWords.js";
import { verdictOf } from "./verdictOf.js";

export interface SummarySources {
  readonly plant: Plant;
  readonly intake: IntakeFile;
  readonly fit: FitFile;
  readonly bound: BoundFile;
  readonly certificates: readonly CertificateFile[];
  readonly engine: Summary["engine"];
  readonly seed: number;
  readonly seconds: Readonly<Record<string, number>>;
}

export function summaryOf(sources: SummarySources): Summary {
  const { plant, intake, fit, bound, certificates, engine, seed, seconds } = sources;
  const list = CERTIFICATE_KINDS.flatMap((kind) => {
    const file = certificates.find(({ name }) => name === kind.name);
    return file === undefined ? [] : [certificateSummary(plant, kind, file)];
  });
  const learned = list.find(({ name }) => name === "learned") ?? null;
  const named = ({ name, unit }: { name: string; unit: { name: string } }): NamedUnit => ({ name, unit: unit.name });
  const goal = goalOf(plant);
  const isSupported = intake.unsupportedShare === 0 || plant.settings.unsupported === "accept";
  return {
    plant: plant.name,
    description: plant.description,
    verdict: verdictOf({ goal, certificates: list, unsupportedShare: intake.unsupportedShare, isSupported, plant }),
    states: plant.states.map(named),
    inputs: plant.inputs.map(named),
    goal,
    disturbance: {
      confidence: bound.confidence,
      calibrationRuns: bound.calibrationRuns,
      window: bound.window,
      channels: plant.leftover.map(({ name, unit }, c) => ({
        name,
        unit: unit.name,
        bound: bound.bounds.fitted[c]! / unit.factor,
        boundPrior: bound.bounds.prior[c]! / unit.factor,
      })),
      testRuns: bound.testScores.length,
      testShareCovered: bound.testShareCovered,
    },
    residual: { channels: fit.channels },
    certificates: list,
    envelope: envelopeOf(plant, learned),
    assumptions: assumptionsOf(plant, bound),
    cautions: cautionsOf(plant, intake, fit),
    unsupportedShare: intake.unsupportedShare,
    engine,
    seed,
    seconds,
  };
}

function goalOf(plant: Plant): Summary["goal"] {
  const { goal } = plant.settings;
  const { unit, name: state } = plant.states[goalState(plant, goal)]!;
  if (goal.kind === "state") return { name: state, unit: unit.name, direction: state };
  const direction = {
    planar: "any direction in the plane",
    along: "along the planned heading",
    across: "across the planned heading",
  }[goal.kind];
  return { name: goal.kind, unit: unit.name, direction };
}

function certificateSummary(plant: Plant, kind: CertificateKind, file: CertificateFile): CertificateSummary {
  const { name, title, model, metric } = kind;
  const { evidence } = file;
  const nothing = {
    rate: null,
    provedRate: null,
    provedShare: 0,
    failingShareUpper: null,
    counted: null,
    margins: {},
    authority: {},
    tubeRadius: null,
  };
  if (evidence === null) {
    return {
      ...{ name, title, model, metric, status: "absent", reason: file.note, evidence: "sampled", worstRate: null },
      ...nothing,
    } as const;
  }
  const { worstRate, worstState, choice, tube, counted, proof } = evidence;
  const shared = { name, title, model, metric, worstRate };
  if (tube === null) {
    return { ...shared, ...nothing, ...refusal(plant, choice, worstRate, worstState), evidence: "sampled" };
  }
  const isFalse = proof?.status === "refuted" || (counted?.failures ?? 0) > 0;
  if (isFalse) {
    const where =
      proof?.refutedAt == null ? "at a random point of the count" : `at ${stateWords(plant, proof.refutedAt)}`;
    return { ...{ ...shared, ...nothing }, status: "fails", reason: `a claim fails ${where}`, evidence: "sampled" };
  }
  const isProved = proof?.status === "proved";
  return {
    ...shared,
    status: "holds",
    reason: isProved ? file.note : [file.note, openWords(proof)].filter((text) => text !== "").join("; "),
    evidence: isProved ? "proved" : counted === null ? "sampled" : "counted",
    rate: tube.rate,
    provedRate: proof?.provedRate ?? null,
    provedShare: proof?.provedShare ?? 0,
    failingShareUpper: counted?.failingShareUpper ?? null,
    counted:
      counted === null ? null : { points: counted.points, failures: counted.failures, confidence: counted.confidence },
    margins: marginsOf(plant, tube),
    authority: Object.fromEntries(plant.inputs.map((input) => [input.name, tube.authority])),
    tubeRadius: tube.radius,
  };
}

/** Why there is no tube. */
function refusal(
  plant: Plant,
  choice: RateChoice,
  worstRate: number | null,
  worstState: readonly number[],
): Pick<CertificateSummary, "status" | "reason"> {
  const { authorityLimit, roomLimit, rate } = plant.settings;
  if (choice.status === "authorityExceeded") {
    const least = percent(choice.least.authority);
    const what = rate === null ? "it needs at least" : `at the asked rate of ${rate} 1/s it needs`;
    const reason = `${what} ${least} of the half-range; the limit is ${percent(authorityLimit)}`;
    return { status: "authorityExceeded", reason };
  }
  if (choice.status === "roomExceeded") {
    const reason = `its margins take at least ${percent(choice.least.room)} of a state's half-range from plans; the limit is ${percent(roomLimit)}`;
    return { status: "roomExceeded", reason };
  }
  if (worstRate === null) {
    const reason =
      choice.curve.length === 0
        ? `it is not positive definite at ${stateWords(plant, worstState)}`
        : `${rate} 1/s was asked for; no rate that fast is within the authority limit`;
    return { status: "fails", reason };
  }
  const asked = rate === null || worstRate <= 0 ? "" : `; ${rate} 1/s was asked for`;
  const where = stateWords(plant, worstState);
  return { status: "fails", reason: `its rate is ${worstRate.toPrecision(3)} 1/s at ${where}${asked}` };
}

function openWords(proof: ProofFile | null): string {
  if (proof === null) return "not proved";
  const stopped = proof.stoppedBy[0] ?? "rate";
  return `${percent(proof.openShare)} of the envelope is still open after ${proof.boxes} boxes, most for the claim '${stopped}'`;
}

/** By name, in the unit of the state, or of the position pair. */
export function marginsOf(plant: Plant, { radius, spreads }: CertifiedTube): Record<string, number> {
  return Object.fromEntries(
    spreads.map(({ direction, value }) => {
      const state = direction.kind === "state" ? direction.state : plant.symmetry.rotation!.position[0];
      const name = direction.kind === "state" ? plant.states[state]!.name : direction.kind;
      return [name, marginOf(radius, value, halfRange(plant, state))];
    }),
  );
}

type Box = Readonly<Record<string, readonly [number, number]>>;

function envelopeOf(plant: Plant, learned: CertificateSummary | null): Summary["envelope"] {
  const boxOf = (specs: readonly { name: string; min: number; max: number; unit: { factor: number } }[]): Box =>
    Object.fromEntries(
      specs.map(({ name, min, max, unit }) => [name, [min / unit.factor, max / unit.factor] as const]),
    );
  const states = boxOf(plant.states);
  const inputs = boxOf(plant.inputs);
  if (learned?.status !== "holds") return { states, inputs, plans: null };
  const plans = { states: {} as Record<string, [number, number]>, inputs: {} as Record<string, [number, number]> };
  let isEmpty = false;
  const keep = (
    into: Record<string, [number, number]>,
    name: string,
    [low, high]: readonly [number, number],
    less: number,
  ) => {
    const part = shrunk({ low, high }, less);
    if (part === null) isEmpty = true;
    else into[name] = [part.low, part.high];
  };
  for (const state of activeStates(plant)) {
    const { name } = plant.states[state]!;
    keep(plans.states, name, states[name]!, learned.margins[name]!);
  }
  for (const { name } of plant.inputs) {
    const [low, high] = inputs[name]!;
    keep(plans.inputs, name, [low, high], (learned.authority[name]! * (high - low)) / 2);
  }
  return { states, inputs, plans: isEmpty ? null : plans };
}

/** Of active coordinates, scaled. */
function stateWords(plant: Plant, at: readonly number[]): string {
  const { stateCenter, stateHalf } = plantScaling(plant);
  const active = activeStates(plant);
  if (active.length === 0) return "every state";
  return active
    .map((state, i) => quantityIn(plant.states[state]!, stateCenter[state]! + stateHalf[state]! * at[i]!))
    .join(", ");
}

function percent(share: number): string {
  return `${(100 * share).toPrecision(3)} %`;
}

function assumptionsOf(plant: Plant, bound: BoundFile): string[] {
  return [
    "Continuous, exact state feedback by the least-norm tracking law: sampling, lag and estimate errors come on top.",
    `The disturbance bound is on the mean over windows of ${bound.window} s; each channel keeps its sign within a window. A push that changes sign faster is not covered.`,
    `With probability at least ${bound.confidence} over the draw of the runs a new run of the same kind stays under the bound throughout. New runs must be drawn like the logged ones: same vehicle, load, ground and kind of driving.`,
    "'Proved' is given the disturbance bound at its confidence, the fitted model and the envelope.",
    "Plans stay inside the part of the envelope given for plans, planned inputs inside theirs, and plans obey the fitted model.",
    `The tube starts within a distance of ${plant.settings.initialDistance} (metric units) of the plan.`,
    ...(plant.symmetry.rotation === null
      ? []
      : ["The plant behaves the same at every position and heading (declared, and checked on the rates)."]),
  ];
}

function cautionsOf(plant: Plant, intake: IntakeFile, fit: FitFile): string[] {
  return [
    "The tracking law changes which states are visited: record runs under it and calibrate again.",
    ...(intake.unsupportedShare > 0
      ? [`The logs hold no states in ${percent(intake.unsupportedShare)} of the envelope; there the model is a guess.`]
      : []),
    ...(fit.status === "noBetterThanPrior" && plant.unknowns.length > 0
      ? [
          "The fit found nothing better than what it started from: look at the unknown terms, the states that they may depend on, and the logs.",
        ]
      : []),
    "The margin covers tracking alone: errors of localisation, map and timing are to be added by the planner.",
  ];
}
