import { describe, expect, it } from "vitest";
import { type CertificateExtremes, chooseRate } from "../../src/tube/chooseRate.js";
import { radiusAt, steadyRadius, tubeRadius } from "../../src/tube/tube.js";

describe("tube", () => {
  it("tends to sigma / lambda for a short window and is larger by lambda T / (1 - e^{-lambda T})", () => {
    expect(steadyRadius({ window: 0, sigma: 0.3 }, 0.6)).toBeCloseTo(0.5, 15);
    expect(steadyRadius({ window: 1e-6, sigma: 0.3 }, 0.6)).toBeCloseTo(0.5, 6);
    const [lambda, T] = [0.6, 0.8];
    const factor = (lambda * T) / (1 - Math.exp(-lambda * T));
    expect(steadyRadius({ window: T, sigma: 0.3 }, lambda)).toBeCloseTo(0.5 * factor, 14);
  });

  it("covers the worst push that a windowed bound allows, and no less is enough", () => {
    // d' = -lambda d + s(t), the mean of s over each window at most sigma, s >= 0: all of it at the window's end.
    const [lambda, T, sigma, start] = [0.9, 0.5, 0.2, 0.05];
    const disturbance = { window: T, sigma };
    let d = start;
    for (let k = 1; k <= 40; k++) {
      d = d * Math.exp(-lambda * T) + T * sigma;
      expect(d).toBeLessThanOrEqual(radiusAt(k * T, disturbance, lambda, start) + 1e-12);
      expect(d).toBeCloseTo(radiusAt(k * T, disturbance, lambda, start), 12);
    }
    expect(d).toBeCloseTo(steadyRadius(disturbance, lambda), 6);
  });

  it("uses the larger of the start and the steady radius", () => {
    expect(tubeRadius({ window: 0, sigma: 0.1 }, 1, 0.4)).toBe(0.4);
    expect(tubeRadius({ window: 0, sigma: 0.1 }, 1, 0)).toBe(0.1);
    // the supremum over all times, from any start
    for (const start of [0, 0.02, 0.05, 0.2]) {
      const disturbance = { window: 0.5, sigma: 0.2 };
      let most = start;
      for (let t = 1e-9; t < 30; t += 0.01) most = Math.max(most, radiusAt(t, disturbance, 0.9, start));
      const radius = tubeRadius(disturbance, 0.9, start);
      expect(radius).toBeGreaterThanOrEqual(most * (1 - 1e-12));
      expect(radius).toBeLessThan(most * (1 + 1e-8));
    }
  });

  // The trade's scaling rule, common practice: a tube is proportional to the disturbance and, unhurried, to 1/lambda.
  it("scales with the disturbance and with 1/lambda", () => {
    expect(steadyRadius({ window: 0.4, sigma: 0.6 }, 0.7)).toBeCloseTo(
      2 * steadyRadius({ window: 0.4, sigma: 0.3 }, 0.7),
      15,
    );
    expect(steadyRadius({ window: 0, sigma: 0.3 }, 1.4)).toBeCloseTo(
      steadyRadius({ window: 0, sigma: 0.3 }, 0.7) / 2,
      15,
    );
  });
});

describe("choice of the rate", () => {
  // Double integrator's density by hand (see test/verify/condition.test.ts), infinite at the rate a.
  const [a, b] = [0.7, 1.9];
  const density = (rate: number): number =>
    rate >= a
      ? Number.POSITIVE_INFINITY
      : (2 * rate * b + (b - 2 * rate * a) ** 2 / (2 * a - 2 * rate)) / Math.sqrt(b - a * a);
  const extremes: CertificateExtremes = {
    usableRate: 0.99 * a,
    sigma: 0.05,
    authorityDensity: density,
    goalSpread: () => 4,
    widestSpread: 1,
  };
  const request = { window: 0.2, initialDistance: 0, authorityLimit: 0.4, roomLimit: 0.9, rate: null };

  it("is the fastest that the authority limit allows, so the margin is the least", () => {
    const choice = chooseRate(extremes, request);
    if (choice.status !== "chosen") throw new Error(choice.status);
    const { point } = choice;
    expect(point.authority).toBeLessThanOrEqual(0.4);
    const authorityAt = (rate: number): number =>
      (steadyRadius({ window: 0.2, sigma: 0.05 }, rate) * density(rate)) / 2;
    expect(point.authority).toBeCloseTo(authorityAt(point.rate), 12);
    let brute = 0;
    for (let rate = 0.001; rate < 0.99 * a; rate += 0.0001) if (authorityAt(rate) <= 0.4) brute = rate;
    expect(point.rate).toBeCloseTo(brute, 3);
    expect(point.margin).toBeCloseTo(2 * point.radius, 12);
  });
  it("doubles margin and authority with the disturbance at a given rate", () => {
    const at = (sigma: number) => chooseRate({ ...extremes, sigma }, { ...request, rate: 0.4, authorityLimit: 10 });
    const [one, two] = [at(0.05), at(0.1)];
    if (one.status !== "chosen" || two.status !== "chosen") throw new Error("not chosen");
    expect(two.point.margin / one.point.margin).toBeCloseTo(2, 12);
    expect(two.point.authority / one.point.authority).toBeCloseTo(2, 12);
  });
  it("says so when no rate meets the limit, when none contracts, and when a given rate is not reached", () => {
    expect(chooseRate(extremes, { ...request, authorityLimit: 1e-3 }).status).toBe("authorityExceeded");
    expect(chooseRate({ ...extremes, usableRate: -0.1 }, request).status).toBe("noRate");
    expect(chooseRate(extremes, { ...request, rate: 0.695 }).status).toBe("noRate");
  });
  it("leaves plans their room: slower rates that take too much are not chosen, and none is when all do", () => {
    const chosen = chooseRate(extremes, request);
    if (chosen.status !== "chosen") throw new Error(chosen.status);
    expect(chosen.point.room).toBeCloseTo(chosen.point.radius, 12);
    const wide = { ...extremes, widestSpread: (1.01 * (0.9 / chosen.point.radius)) ** 2 };
    const refused = chooseRate(wide, request);
    expect(refused.status).toBe("roomExceeded");
    if (refused.status === "roomExceeded") expect(refused.least.room).toBeGreaterThan(0.9);
    expect(chooseRate(wide, { ...request, authorityLimit: 1e-3 }).status).toBe("authorityExceeded");
  });
  it("bounds the rate of a fully actuated plant by the authority alone", () => {
    const choice = chooseRate(
      { ...extremes, usableRate: Number.POSITIVE_INFINITY, authorityDensity: (rate) => 2 * rate },
      request,
    );
    if (choice.status !== "chosen") throw new Error(choice.status);
    expect(choice.point.authority).toBeLessThanOrEqual(0.4);
    expect(choice.point.rate).toBeGreaterThan(1);
  });
});
