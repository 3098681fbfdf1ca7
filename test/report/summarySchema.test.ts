import { Ajv } from "ajv";
import { describe, expect, it } from "vitest";
import { summaryJsonSchema, summarySchema } from "../../src/report/summarySchema.js";
import { BARE, BOAT, CRANE, NOTHING, ROVER } from "./madeUp.js";

const EXAMPLES = { ROVER, CRANE, BOAT, BARE, NOTHING };

describe("the schema of summary.json", () => {
  const schema = summaryJsonSchema();
  const validate = new Ajv({ allErrors: true, strictTuples: false }).compile(schema);

  it("is the saved one (after a change: vitest run test/report/summarySchema.test.ts -u)", async () => {
    await expect(`${JSON.stringify(schema, null, 2)}\n`).toMatchFileSnapshot("../../configs/summary.schema.json");
  });

  it.each(Object.entries(EXAMPLES))("accepts %s as saved and read again", (_, { summary }) => {
    const saved: unknown = JSON.parse(JSON.stringify(summary));
    validate(saved);
    expect(validate.errors ?? []).toEqual([]);
    expect(summarySchema.parse(saved)).toEqual(summary);
  });

  it.each([
    ["a key too many", { extra: 1 }],
    ["a missing key", { seed: undefined }],
    ["a share over 1", { unsupportedShare: 1.2 }],
    ["a seed with a fraction", { seed: 0.5 }],
    ["an unknown status", { certificates: [{ ...ROVER.summary.certificates[0], status: "maybe" }] }],
    ["a number that JSON cannot hold", { certificates: [{ ...ROVER.summary.certificates[0], tubeRadius: "big" }] }],
    ["a box with one end", { envelope: { ...ROVER.summary.envelope, states: { speed: [1] } } }],
    ["a box with three ends", { envelope: { ...ROVER.summary.envelope, states: { speed: [1, 2, 3] } } }],
    ["a negative margin", { certificates: [{ ...ROVER.summary.certificates[0], margins: { px: -1 } }] }],
  ])("refuses %s", (_, change) => {
    const saved: unknown = JSON.parse(JSON.stringify({ ...ROVER.summary, ...change }));
    expect(validate(saved)).toBe(false);
    expect(summarySchema.safeParse(saved).success).toBe(false);
  });
});
