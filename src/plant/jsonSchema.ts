/** JSON Schema (draft 7) of the plant file, for editors; saved as configs/plant.schema.json. */
import { z } from "zod";
import { plantSchema } from "./plantSchema.js";

export interface JsonSchema {
  readonly description?: string;
  readonly properties?: Readonly<Record<string, JsonSchema>>;
  readonly additionalProperties?: JsonSchema | boolean;
  readonly items?: JsonSchema | readonly JsonSchema[];
  readonly [key: string]: unknown;
}

export function plantJsonSchema(): JsonSchema {
  const schema = z.toJSONSchema(plantSchema, { target: "draft-07", io: "input" });
  return { title: "Fairlead plant file", ...schema } as JsonSchema;
}

/** The schema of what stands at a path; null where it says nothing. */
export function schemaAt(schema: JsonSchema, path: readonly (string | number)[]): JsonSchema | null {
  let at: JsonSchema = schema;
  for (const step of path) {
    const items = typeof step === "number" ? (Array.isArray(at.items) ? at.items[step] : at.items) : undefined;
    const open = typeof at.additionalProperties === "object" ? at.additionalProperties : undefined;
    const named = Object.hasOwn(at.properties ?? {}, step) ? at.properties![step] : undefined;
    const next = typeof step === "number" ? (items as JsonSchema | undefined) : (named ?? open);
    if (next === undefined) return null;
    at = next;
  }
  return at;
}
