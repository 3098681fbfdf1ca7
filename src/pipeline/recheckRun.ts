/**
 * Proves the learned certificate of a run folder again, from its saved artifacts alone and without searching: the boxes
 * tile the envelope and each passes, the claims are those of the tube, the tube follows from the claims and the
 * disturbance bound, and the summary's margins follow from the tube.
 */
import { readSavedTable } from "../logs/savedTable.js";
import type { ResidualFile } from "../model/controlAffine.js";
import type { Plant } from "../plant/plant.js";
import type { Summary } from "../report/artifacts.js";
import { tubeRadius } from "../tube/tube.js";
import type { ListedClaims } from "../verify/proof/claims.js";
import type { LeafTable } from "../verify/proof/leafTable.js";
import { recheck } from "../verify/proof/recheck.js";
import { FILES, type MetricArtifact, readBounds } from "./artifacts.js";
import { boxesFromColumns } from "./boxesTable.js";
import type { CertificateFile } from "./certificate.js";
import { type CertifiedTube, sumOf } from "./certifyMetric.js";
import { tubeClaims } from "./proveTube.js";
import { type RunFolder, RunFolderError } from "./runFolder.js";
import { marginsOf } from "./summaryOf.js";

export interface RunRecheck {
  readonly holds: boolean;
  readonly boxes: number;
  readonly faults: readonly string[];
}

/** Throws RunFolderError when the folder holds no proof. */
export function recheckRun(
  folder: RunFolder,
  plant: Plant,
  progress: (done: number, total: number, note: string) => void,
): RunRecheck {
  const learned = folder.readJson<CertificateFile[]>(FILES.certificates).find(({ name }) => name === "learned");
  const tube = learned?.evidence?.tube ?? null;
  const made = folder.readJson<MetricArtifact>(FILES.learned);
  if (tube === null || made.status === "absent" || !folder.has(FILES.boxes)) {
    throw new RunFolderError(`${folder.path}: holds no proof to check again; the learned metric has no tube there`);
  }
  const { wbar, window } = readBounds(folder, "fitted");
  const claims = tubeClaims(tube, Array.from(wbar));
  const faults = [...changedFiles(folder), ...tubeFaults(folder, plant, tube, wbar, window)];
  const boxes = readBoxes(folder, plant, claims);
  if (typeof boxes === "string") return { holds: false, boxes: 0, faults: [...faults, boxes] };
  const subject = { plant, residual: folder.readJson<ResidualFile>(FILES.residual), metric: made.metric };
  const again = recheck(subject, claims, boxes, progress);
  const all = [...faults, ...again.faults];
  return { holds: all.length === 0, boxes: again.boxes, faults: all };
}

function readBoxes(folder: RunFolder, plant: Plant, claims: ListedClaims): LeafTable | string {
  try {
    return boxesFromColumns(plant, readSavedTable(folder.file(FILES.boxes)), claims);
  } catch (error) {
    return (error as Error).message;
  }
}

/** A file of another run may pass by itself: what the manifest says that this run made must still be there. */
function changedFiles(folder: RunFolder): string[] {
  return Object.values(folder.manifest()?.stages ?? {})
    .flatMap(({ files }) => Object.entries(files))
    .filter(([name, hash]) => !folder.has(name) || folder.hash(name) !== hash)
    .map(([name]) => `${name} is not the file that the run made: its hash is not the manifest's`);
}

/** What does not follow: radius and authority from the claims, margins of the summary from the tube. */
function tubeFaults(
  folder: RunFolder,
  plant: Plant,
  tube: CertifiedTube,
  wbar: Float64Array,
  window: number,
): string[] {
  const faults: string[] = [];
  const expect = (what: string, given: number | null | undefined, derived: number): void => {
    if (given === undefined || given === null || !(Math.abs(given - derived) <= 1e-9 * Math.abs(derived))) {
      faults.push(`${what} is ${given}, but its claims give ${derived}`);
    }
  };
  const radius = tubeRadius({ window, sigma: tube.sigma }, tube.rate, plant.settings.initialDistance);
  expect("the tube's sigma", tube.sigma, sumOf(tube.pushes));
  expect("the tube's radius", tube.radius, radius);
  expect("the tube's authority", tube.authority, (radius * tube.authorityDensity) / 2);
  if (!(tube.rate < tube.claimedRate)) faults.push("the tube's rate is not below the claimed rate");
  const { certificates, disturbance } = folder.readJson<Summary>(FILES.summary);
  for (const [c, { name, unit }] of plant.leftover.entries())
    expect(`the summary's disturbance bound of ${name}`, disturbance.channels[c]?.bound, wbar[c]! / unit.factor);
  const summary = certificates.find(({ name }) => name === "learned");
  expect("the summary's rate", summary?.rate, tube.rate);
  expect("the summary's tube radius", summary?.tubeRadius, tube.radius);
  const margins = marginsOf(plant, tube);
  for (const [name, margin] of Object.entries(margins))
    expect(`the summary's margin of ${name}`, summary?.margins[name], margin);
  for (const name of Object.keys(summary?.margins ?? {}))
    if (margins[name] === undefined) faults.push(`the summary's margin of ${name} follows from no claim`);
  for (const { name } of plant.inputs)
    expect(`the summary's authority of ${name}`, summary?.authority[name], tube.authority);
  return faults;
}
