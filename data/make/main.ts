/** Makes the bundled logs: `npm run data`. The same seed gives the same bytes. */
import { writeFileSync } from "node:fs";
import { join } from "node:path";
import { DATA_SETS } from "./dataSets.js";
import { logFile } from "./logFile.js";

const folder = join(import.meta.dirname, "..");
for (const set of DATA_SETS) writeFileSync(join(folder, `${set.name}.arrow`), logFile(set));
