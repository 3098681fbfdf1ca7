import { describe, expect, it } from "vitest";
import { editDistance, nearestName } from "../../src/plant/nearestName.js";

describe("names that were probably meant", () => {
  it("counts insertions, deletions, replacements and swaps of neighbours", () => {
    // closed cases; "kitten" and "sitting" are the customary example of distance 3
    for (const [a, b, wanted] of [
      ["", "abc", 3],
      ["abc", "", 3],
      ["kitten", "sitting", 3],
      ["envelope", "envelop", 1],
      ["raets", "rates", 1],
      ["ca", "abc", 3],
    ] as const) {
      expect(editDistance(a, b)).toBe(wanted);
      expect(editDistance(b, a)).toBe(wanted);
    }
  });

  it("suggests near names only", () => {
    const keys = ["states", "inputs", "rates", "margin"];
    expect(nearestName("State", keys)).toBe("states");
    expect(nearestName("input", keys)).toBe("inputs");
    expect(nearestName("marign", keys)).toBe("margin");
    expect(nearestName("logs", keys)).toBeNull();
    expect(nearestName("x", ["y"])).toBeNull();
  });
});
