import { createHash } from "node:crypto";
import { readdirSync, readFileSync } from "node:fs";
import { join } from "node:path";

/** Version of the tool, as in package.json (held equal by a test). */
export const FAIRLEAD_VERSION = "0.1.0";

/** SHA-256 over the tool's own code: results of other code are not kept, whatever its version says. */
export function codeHash(): string {
  const root = join(import.meta.dirname, "..");
  const hash = createHash("sha256");
  const files = readdirSync(root, { recursive: true, encoding: "utf8" }).filter((name) => /\.(js|ts|wasm)$/.test(name));
  for (const name of files.sort()) hash.update(name).update(readFileSync(join(root, name)));
  return hash.digest("hex");
}
