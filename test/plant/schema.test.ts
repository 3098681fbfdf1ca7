import { Ajv } from "ajv";
import { describe, expect, it } from "vitest";
import { parse } from "yaml";
import { type JsonSchema, plantJsonSchema } from "../../src/plant/jsonSchema.js";
import { BOAT, CRANE, ROVER } from "./examples.js";

describe("the plant file's JSON schema", () => {
  const schema = plantJsonSchema();

  it("is the saved one (after a change: vitest run test/plant/schema.test.ts -u)", async () => {
    await expect(`${JSON.stringify(schema, null, 2)}\n`).toMatchFileSnapshot("../../configs/plant.schema.json");
  });

  it("accepts the examples and refuses what their contract forbids", () => {
    const validate = new Ajv({ allErrors: true, allowUnionTypes: true, strictTuples: false }).compile(schema);
    for (const text of [ROVER, CRANE, BOAT]) {
      const isValid = validate(parse(text));
      expect(validate.errors ?? []).toEqual([]);
      expect(isValid).toBe(true);
    }
    for (const [from, to] of [
      ["envelope: [-12, 12]", "envelop: [-12, 12]"],
      ["envelope: [-12, 12]", "envelope: [-12]"],
      ["unit: deg,", "unit: degree,"],
      ["{rate: swayRate, from", "{gain: accel, from"],
      ["minimise: sway", "minimise: sway, authority: 1.5"],
      ["minimise: sway", "authority: 0.5"],
    ] as const) {
      expect(CRANE).toContain(from);
      expect(validate(parse(CRANE.replace(from, to))), to).toBe(false);
    }
  });

  it("describes every key", () => {
    const undescribed: string[] = [];
    const visit = (at: JsonSchema, path: string): void => {
      for (const [key, part] of Object.entries(at.properties ?? {})) {
        if (!part.description) undescribed.push(`${path}.${key}`);
        visit(part, `${path}.${key}`);
      }
      if (typeof at.additionalProperties === "object") {
        if (!at.additionalProperties.description) undescribed.push(`${path}.*`);
        visit(at.additionalProperties, `${path}.*`);
      }
      if (at.items !== undefined && !Array.isArray(at.items)) visit(at.items as JsonSchema, `${path}[]`);
    };
    visit(schema, "");
    expect(undescribed).toEqual([]);
    expect(Object.keys(schema.properties ?? {})).toHaveLength(14);
  });
});
