/** The same plant file with other logs: for a refit, which keeps everything else, comments included. */
import { parseDocument } from "yaml";

export interface PlantChanges {
  /** Absolute paths. */
  readonly logFiles: readonly string[];
  readonly confidence: number;
  readonly split: { readonly fit: number; readonly calibration: number; readonly test: number };
}

export function rewritePlant(text: string, { logFiles, confidence, split }: PlantChanges): string {
  const document = parseDocument(text);
  document.setIn(["logs", "files"], [...logFiles]);
  document.setIn(["disturbance", "confidence"], confidence);
  document.setIn(["disturbance", "split"], split);
  return document.toString({ lineWidth: 0 });
}
