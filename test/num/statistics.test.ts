import { describe, expect, it } from "vitest";
import { seededRandom } from "../../src/num/random.js";
import { clopperPearsonLower, clopperPearsonUpper, conformalRank, runsNeeded } from "../../src/num/statistics.js";

describe("Clopper-Pearson limits", () => {
  it("are those of NIST/SEMATECH e-Handbook 7.2.4.2: 4 of 20, two-sided 90 %", () => {
    expect(clopperPearsonLower(4, 20, 0.95)).toBeCloseTo(0.0713539, 7);
    expect(clopperPearsonUpper(4, 20, 0.95)).toBeCloseTo(0.4010281, 7);
  });
  // two-sided 95 %, recomputed from the beta law
  it.each([
    [1, 10, 0.0025286, 0.4450161],
    [5, 10, 0.187086, 0.812914],
    [10, 100, 0.0490047, 0.1762226],
  ])("%i of %i", (failures, trials, low, high) => {
    expect(clopperPearsonLower(failures, trials, 0.975)).toBeCloseTo(low, 7);
    expect(clopperPearsonUpper(failures, trials, 0.975)).toBeCloseTo(high, 7);
  });
  it("gives 0 and 1 at the ends", () => {
    expect(clopperPearsonLower(0, 10, 0.975)).toBe(0);
    expect(clopperPearsonUpper(10, 10, 0.975)).toBe(1);
    expect(clopperPearsonUpper(0, 10, 0.975)).toBeCloseTo(0.3084971, 7);
  });
  // common acceptance-sampling practice: trials without a failure for a share, one-sided
  it.each([
    [0.05, 59, 0.95],
    [0.01, 299, 0.95],
    [0.001, 2995, 0.95],
    [0.0001, 29956, 0.95],
    [0.01, 1375, 1 - 1e-6],
    [0.001, 13809, 1 - 1e-6],
  ])("share %d needs %i trials without a failure at %d", (share, trials, confidence) => {
    expect(clopperPearsonUpper(0, trials, confidence)).toBeLessThanOrEqual(share);
    expect(clopperPearsonUpper(0, trials - 1, confidence)).toBeGreaterThan(share);
  });
  it("covers a known share at least as often as it says", () => {
    const random = seededRandom(11);
    let covered = 0;
    const repeats = 4000;
    for (let r = 0; r < repeats; r++) {
      let failures = 0;
      for (let i = 0; i < 60; i++) if (random.uniform() < 0.07) failures++;
      if (clopperPearsonUpper(failures, 60, 0.9) >= 0.07) covered++;
    }
    expect(covered / repeats).toBeGreaterThan(0.9 - 3 * Math.sqrt((0.9 * 0.1) / repeats));
  });
});

describe("split conformal rank", () => {
  it("is ceil((K + 1)(1 - alpha)), none when too few scores", () => {
    expect(conformalRank(100, 0.1)).toBe(91);
    expect(conformalRank(999, 0.01)).toBe(990);
    expect(conformalRank(9, 0.1)).toBe(9);
    expect(conformalRank(8, 0.1)).toBeNull();
    for (const alpha of [0.5, 0.25, 0.2, 0.1, 0.05, 0.01]) {
      const needed = runsNeeded(alpha);
      expect(conformalRank(needed, alpha)).toBe(needed);
      expect(conformalRank(needed - 1, alpha)).toBeNull();
    }
  });
  it("is not moved by rounding: against whole numbers for every count to 400 and whole percent", () => {
    for (let percent = 1; percent < 100; percent++) {
      for (let count = 1; count <= 400; count++) {
        const product = (count + 1) * (100 - percent);
        const rank = (product - (product % 100)) / 100 + (product % 100 === 0 ? 0 : 1);
        if (conformalRank(count, percent / 100) === (rank <= count ? rank : null)) continue;
        expect.unreachable(`${count} scores at ${percent} %`);
      }
    }
  });
  it("covers a new score with a share that follows Beta(k, n + 1 - k): n = 100, alpha = 0.1", () => {
    // Vovk, "Conditional validity of inductive conformal predictors", ACML 2012: k = 91, mean .90099, 5 to 95 % .848 to .945
    const random = seededRandom(5);
    const repeats = 4000;
    const coverages = Array.from({ length: repeats }, () => {
      const scores = Array.from({ length: 100 }, () => random.uniform()).sort((a, b) => a - b);
      // of uniform scores the bound is its own coverage
      return scores[conformalRank(100, 0.1)! - 1]!;
    }).sort((a, b) => a - b);
    const mean = coverages.reduce((sum, value) => sum + value, 0) / repeats;
    const sd = Math.sqrt((91 * 10) / (101 ** 2 * 102));
    expect(Math.abs(mean - 91 / 101)).toBeLessThan((4 * sd) / Math.sqrt(repeats));
    // the whole law: P(coverage <= c) is the chance of 91 or more of 100 uniforms below c. The largest gap of an empirical
    // law exceeds sqrt(ln(2 / d) / (2 N)) with a chance of at most d (Massart, Annals of Probability 18, 1990)
    const law = (c: number): number => {
      let [term, sum] = [c ** 100, c ** 100];
      for (let k = 100; k > 91; k--) {
        term *= (k / (101 - k)) * ((1 - c) / c);
        sum += term;
      }
      return sum;
    };
    expect(law(0.848)).toBeCloseTo(0.05, 2);
    expect(law(0.945)).toBeCloseTo(0.95, 2);
    const gap = coverages.reduce((worst, c, k) => Math.max(worst, Math.abs((k + 0.5) / repeats - law(c))), 0);
    expect(gap).toBeLessThan(Math.sqrt(Math.log(2 / 1e-4) / (2 * repeats)));
  });
});
