/**
 * Form of the plant file: keys, types, ranges, defaults. What needs names, units or formulas is checked by the readers
 * (readQuantities.ts, readRates.ts, readSettings.ts). Descriptions are shown by editors and quoted in messages.
 */
import { z } from "zod";
import { unitNames } from "./units.js";

/** Largest plant. */
export const MAX_STATES = 12;
export const MAX_INPUTS = 4;
export const MAX_LEFTOVER = 16;

const NAME = /^[A-Za-z][A-Za-z0-9_]{0,39}$/;
const name = z.string().regex(NAME, "a name: a letter, then letters, digits or _, at most 40");
// which units there are is said to editors here and checked by the readers, which know what the unit is for
const unit = z
  .string()
  .meta({ enum: unitNames() })
  .describe("unit of the value as people write it, such as m, deg, m/s or N m");
const positive = z.number().positive();
const pair = z.tuple([z.number(), z.number()]);
const column = z.string().min(1).describe("column of the log files");
const formula = z.union([z.string(), z.number()]);
const stateNames = z.array(z.string()).min(1);

const state = z
  .strictObject({
    unit,
    envelope: pair.describe("[least, greatest] value that the claim covers, in the unit"),
  })
  .describe("a state: its unit and its envelope");

const input = z
  .strictObject({
    unit,
    range: pair.describe("[least, greatest] value of the input, in the unit"),
  })
  .describe("an input: its unit and its range");

const unknown = z
  .strictObject({
    rate: z.string().describe("state whose rate has an unknown part of its own").optional(),
    gain: z.string().describe("input whose effect on a rate is partly unknown; needs `in`").optional(),
    in: z.string().describe("state on whose rate the gain acts; only with `gain`").optional(),
    from: stateNames.describe("states that the unknown part may depend on; no cyclic one and no rotated heading"),
  })
  .meta({ oneOf: [{ required: ["rate"] }, { required: ["gain", "in"] }] })
  .describe("one learned function of the states in `from`, added to a rate (`rate`) or times an input (`gain`, `in`)");

const leftover = z
  .strictObject({
    unit,
    on: z
      .record(name, formula.describe("effect of one SI unit of the disturbance on this rate: a formula of the states"))
      .meta({ minProperties: 1 })
      .describe("state -> effect of one SI unit of the disturbance on its rate"),
  })
  .describe("a disturbance channel: its unit and which rates it acts on");

const symmetry = z
  .strictObject({
    translation: z.array(z.string()).default([]).describe("states along which a shift changes nothing"),
    rotation: z
      .strictObject({
        position: z.tuple([z.string(), z.string()]).describe("[x, y]: position in a world frame"),
        heading: z.string().describe("heading, positive counter-clockwise (ISO 8855)"),
      })
      .optional()
      .describe("planar rotation that changes nothing; implies translation of the position pair"),
  })
  .describe("what the rates do not depend on; checked on the rates before it is used");

const logs = z
  .strictObject({
    files: z
      .array(z.string().min(1))
      .min(1)
      .describe("recorded runs (CSV, Arrow), relative to the folder of the plant file"),
    time: z
      .strictObject({
        column: column.default("time").describe("column of the time"),
        unit: unit.default("s").describe("unit of the time column"),
      })
      .prefault({})
      .describe("column and unit of the time"),
    run: z.string().min(1).optional().describe("column that names the run; omit it when each file is one run"),
    columns: z
      .record(
        name,
        z
          .strictObject({
            column: column.optional().describe("column of this state or input; its own name if omitted"),
            unit: unit.optional().describe("unit in the log files; the plant's unit if omitted"),
          })
          .describe("where this state or input stands in the log files"),
      )
      .default({})
      .describe("state or input -> column and unit in the log files, where they differ from the plant's"),
    maxGap: positive.default(0.1).describe("a step longer than this (s) starts a new piece of the run"),
    unsupported: z
      .enum(["refuse", "accept"])
      .default("refuse")
      .describe("refuse or accept claims where the logs hold no states"),
  })
  .describe("where the recorded runs are and how to read them");

const share = z.number().gt(0).lt(1);

const disturbance = z
  .strictObject({
    confidence: share
      .default(0.9)
      .describe("chance, above 0 and below 1, that a new run stays below the disturbance bound throughout"),
    window: z
      .union([z.literal("auto"), positive])
      .default("auto")
      .describe(
        "length (s, above 0) of the windows over which the leftover is averaged, or auto: chosen on the fit runs",
      ),
    split: z
      .strictObject({
        fit: share.default(0.5).describe("share of the runs that the residual is fitted on"),
        calibration: share.default(0.3).describe("share of the runs that the bound is taken from"),
        test: z.number().min(0).lt(1).default(0.2).describe("share of the runs kept for the report; 0: none"),
      })
      .prefault({})
      .describe("shares of the runs; they add up to 1"),
  })
  .describe("how the disturbance bound is drawn from the runs");

const margin = z
  .strictObject({
    minimise: z
      .string()
      .describe("which margin to make small: a state, or across, along or planar where a rotation is declared"),
    authority: z
      .number()
      .gt(0)
      .max(1)
      .default(0.4)
      .describe("share, above 0 and up to 1, of each input's half-range that tracking may use"),
    room: z
      .number()
      .gt(0)
      .lt(1)
      .default(0.5)
      .describe(
        "share, above 0 and below 1, of each state's half-range that the margins may take from plans; positions and headings that nothing depends on are free",
      ),
    rate: z
      .union([z.literal("auto"), positive])
      .default("auto")
      .describe("contraction rate (1/s, above 0), or auto: chosen by the tool"),
    initialDistance: z
      .number()
      .min(0)
      .default(0)
      .describe("distance from the plan at the start, in the metric; 0 or more"),
  })
  .describe("what the margin is asked for");

const width = z.int().min(1).max(256).default(16).describe("units of each hidden layer, 1 to 256");
const steps = z.int().min(1).max(1_000_000).default(1500).describe("training steps, 1 to 1000000");

const networks = z
  .strictObject({
    residual: z.strictObject({ width, steps }).prefault({}).describe("networks of the unknown parts of the rates"),
    metric: z
      .strictObject({
        width,
        steps,
        rounds: z.int().min(1).max(100).default(6).describe("rounds of training and search for violations, 1 to 100"),
        from: stateNames
          .optional()
          .describe("states that the metric may depend on; all but cyclic ones and a rotated heading if omitted"),
      })
      .prefault({})
      .describe("network of the dual metric"),
  })
  .describe("size and training of the networks");

export const plantSchema = z
  .strictObject({
    plant: z
      .string()
      .regex(/^[A-Za-z0-9][A-Za-z0-9_-]{0,59}$/, "letters, digits, - and _, at most 60")
      .describe("short name of the plant: letters, digits, - and _"),
    description: z.string().default("").describe("one line about the plant for the report"),
    states: z
      .record(name, state)
      .meta({ minProperties: 1, maxProperties: MAX_STATES })
      .describe(`states by name, 1 to ${MAX_STATES}`),
    inputs: z
      .record(name, input)
      .meta({ minProperties: 1, maxProperties: MAX_INPUTS })
      .describe(`inputs by name, 1 to ${MAX_INPUTS}`),
    parameters: z
      .record(name, z.number().describe("value in SI units"))
      .default({})
      .describe("constants that the formulas use, in SI units"),
    rates: z
      .record(name, formula.describe("rate of this state in SI units: a formula, affine in the inputs"))
      .describe("time derivative of every state, in SI units and radians"),
    unknown: z.array(unknown).default([]).describe("what the rates lack and the networks learn from the logs"),
    leftover: z
      .record(name, leftover)
      .meta({ minProperties: 1, maxProperties: MAX_LEFTOVER })
      .describe(`disturbance channels by name, 1 to ${MAX_LEFTOVER}`),
    symmetry: symmetry.prefault({}),
    logs,
    disturbance: disturbance.prefault({}),
    margin,
    networks: networks.prefault({}),
    seed: z.int().min(0).max(2147483647).default(1).describe("seed of everything random, 0 to 2147483647"),
  })
  .describe("A plant: what is known before any log is read, and what is asked.");

/** A plant file of the right form, defaults filled in. */
export type PlantFile = z.output<typeof plantSchema>;

/** The same with everything of a wrong form left out, so that the remaining mistakes can still be found. */
export type PlantDraft = DeepPartial<PlantFile>;

type DeepPartial<T> = T extends readonly (infer E)[]
  ? readonly DeepPartial<E>[]
  : T extends object
    ? { readonly [K in keyof T]?: DeepPartial<T[K]> | undefined }
    : T;
