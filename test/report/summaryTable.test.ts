import { describe, expect, it } from "vitest";
import { summaryTable } from "../../src/report/summaryTable.js";
import { BARE, BOAT, CRANE, NOTHING, ROVER } from "./madeUp.js";

const ESCAPE = String.fromCharCode(27);

describe("the summary in a terminal", () => {
  it.each([24, 40, 60, 75, 76, 80, 100, 160])("keeps within %d columns", (width) => {
    for (const { summary } of [ROVER, CRANE, BOAT, BARE, NOTHING]) {
      const lines = summaryTable(summary, { width, color: false }).split("\n");
      expect(Math.max(...lines.map((line) => [...line].length))).toBeLessThanOrEqual(width);
    }
  });

  it.each([60, 100])("tells verdict, margins and evidence at %d columns", (width) => {
    const text = summaryTable(ROVER.summary, { width, color: false }).replace(/\s+/g, " ");
    for (const words of [
      "orchard-rover ✓ holds",
      "0.144 m",
      "0.255 m",
      "0.413 m",
      "0.812 1/s",
      "0.0346 %",
      "Continuous, exact state feedback",
    ])
      expect(text).toContain(words);
  });

  it.each([60, 100])("gives no number where a certificate fails, at %d columns", (width) => {
    const [learned, constant] = BOAT.summary.certificates;
    const poisoned = { ...learned!, margins: { across: 7.77 }, authority: { turn: 0.777 }, rate: 7.77 };
    const text = summaryTable({ ...BOAT.summary, certificates: [poisoned, constant!] }, { width, color: false });
    expect(text).toContain("✕ does not hold");
    expect(text).not.toContain("7.7");
    expect(text).toContain("0.208 m");
  });

  it("has colours when asked for only", () => {
    expect(summaryTable(ROVER.summary, { width: 100, color: false })).not.toContain(ESCAPE);
    expect(summaryTable(ROVER.summary, { width: 100, color: true })).toContain(ESCAPE);
  });
});
