/** The schema of summary.json: the written form of the type Summary, saved as configs/summary.schema.json. */
import { z } from "zod";
import type { Summary } from "./artifacts.js";

const share = z.number().min(0).max(1);
const count = z.int().min(0);
const name = z.string().min(1).describe("Name as in the plant file");
const unit = z.string().min(1).describe("Unit of every value of this item; 1 where it has none");
const namedUnit = { name, unit };
const box = z
  .record(z.string().describe("Name as in the plant file"), z.tuple([z.number(), z.number()]))
  .describe("Lower and upper end by name, in the unit of the state or input");

const verdict = z.strictObject({
  holds: z.boolean().describe("True when the learned certificate holds as asked and gives a margin"),
  text: z.string().describe("One or two plain sentences"),
});

const disturbance = z.strictObject({
  confidence: share.describe("Probability, over the draw of the runs, that a new run stays under the bound throughout"),
  calibrationRuns: count.describe("Runs that the bound was calibrated on"),
  window: z.number().min(0).describe("Length of the window that the leftover is averaged over, s"),
  channels: z
    .array(
      z.strictObject({
        ...namedUnit,
        bound: z.number().min(0).describe("Bound of the leftover of the fitted model"),
        boundPrior: z.number().min(0).describe("Bound of the leftover of the prior model"),
      }),
    )
    .describe("Leftover channels; all bounds hold at once"),
  testRuns: count.describe("Held-out runs that the bound was tried on"),
  testShareCovered: share.describe("Share of the held-out runs that stay under the bound throughout"),
});

const residual = z.strictObject({
  channels: z
    .array(
      z.strictObject({
        ...namedUnit,
        rmsePrior: z.number().min(0).describe("Windowed root mean square error of the prior model on held-out runs"),
        rmseFitted: z.number().min(0).describe("The same of the fitted model"),
      }),
    )
    .describe("Rates that have an unknown part"),
});

const certificate = z.strictObject({
  name: z.string().min(1).describe("learned, constant, riccati, constant-prior or riccati-prior"),
  title: z.string().describe("What a reader sees"),
  model: z.enum(["fitted", "prior"]).describe("Model that it was made for and is judged on"),
  metric: z.enum(["network", "constant"]).describe("Kind of metric"),
  status: z
    .enum(["holds", "fails", "authorityExceeded", "roomExceeded", "absent"])
    .describe(
      "holds: margin and authority are given; fails: it does not contract everywhere; authorityExceeded: no rate keeps " +
        "tracking within the authority limit; roomExceeded: its margins leave plans too little of the envelope; absent: no such metric was found",
    ),
  reason: z.string().describe("Why, in words"),
  evidence: z.enum(["sampled", "counted", "proved"]).describe("How the claims are known: their weakest part"),
  rate: z.number().nullable().describe("Contraction rate of the tube, 1/s; null without one"),
  worstRate: z.number().nullable().describe("Worst rate found by sampling and ascent, 1/s; null when absent"),
  provedRate: z.number().nullable().describe("Rate that is proved on the proved share, 1/s; null when nothing is"),
  provedShare: share.describe("Share of the envelope's volume on which the rate is proved"),
  failingShareUpper: share
    .nullable()
    .describe("Upper limit of the volume share where any claim fails; null: uncounted"),
  counted: z
    .strictObject({
      points: count.describe("Fresh random points"),
      failures: count.describe("Points at which any claim fails"),
      confidence: share.describe("One-sided confidence of failingShareUpper"),
    })
    .nullable()
    .describe("The count behind failingShareUpper"),
  margins: z
    .record(z.string().describe("State name, across, along or planar"), z.number().min(0))
    .describe("Tube half-width in the unit of the state, or of the position pair; empty without a tube"),
  authority: z
    .record(z.string().describe("Input name"), z.number().min(0))
    .describe("Share of the input's half-range that tracking may use; empty without a tube"),
  tubeRadius: z.number().min(0).nullable().describe("Tube radius in the metric, no unit; null without a tube"),
});

const envelope = z.strictObject({
  states: box,
  inputs: box,
  plans: z
    .strictObject({ states: box, inputs: box })
    .nullable()
    .describe("Part in which plans must stay: the envelope less margins and authority; null without a margin"),
});

export const summarySchema = z.strictObject({
  plant: z.string().min(1).describe("Name of the plant"),
  description: z.string().describe("What the plant is"),
  verdict: verdict.describe("The answer to what was asked"),
  states: z.array(z.strictObject(namedUnit)).describe("States in plant order"),
  inputs: z.array(z.strictObject(namedUnit)).describe("Inputs in plant order"),
  goal: z
    .strictObject({ ...namedUnit, direction: z.string().describe("The same in words") })
    .describe("The asked margin; its name is its key in the certificates' margins"),
  disturbance: disturbance.describe("Bound of what the model does not explain"),
  residual: residual.describe("The missing dynamics, held against runs that were not used for the fit"),
  certificates: z.array(certificate).describe("Learned and analytic certificates, on the same meaning of disturbance"),
  envelope: envelope.describe("Box that the claims cover"),
  assumptions: z.array(z.string()).describe("What every number rests on"),
  cautions: z.array(z.string()).describe("What to mind in use"),
  unsupportedShare: share.describe("Share of the envelope where the logs hold no states"),
  engine: z
    .strictObject({
      name: z.string().describe("native, wasm or cpu"),
      version: z.string().describe("Version of the learning library"),
      rejected: z
        .array(
          z.strictObject({
            name: z.string().describe("Engine that was tried"),
            reason: z.string().describe("Why not used"),
          }),
        )
        .describe("Engines that were tried first"),
    })
    .describe("What the networks were trained with"),
  seed: count.describe("Fixes the outcome on one engine"),
  seconds: z
    .record(z.string().describe("Stage"), z.number().min(0))
    .describe("Wall seconds: the only numbers that differ between two runs with one seed on one engine"),
});

type DeepReadonly<T> = T extends object ? { readonly [K in keyof T]: DeepReadonly<T[K]> } : T;
type Agree<A, B> = [A] extends [B] ? ([B] extends [A] ? true : never) : never;
/** Does not compile when the schema and the type say different things. */
export const SCHEMA_AGREES_WITH_SUMMARY: Agree<
  DeepReadonly<z.infer<typeof summarySchema>>,
  DeepReadonly<Summary>
> = true;

/** JSON Schema, draft 7. */
export function summaryJsonSchema(): Readonly<Record<string, unknown>> {
  return { title: "Fairlead summary", ...z.toJSONSchema(summarySchema, { target: "draft-07" }) };
}
