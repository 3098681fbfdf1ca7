// Logs whose leftover is known in closed form: the states are written down first, the leftover follows from them.
import { describe, expect, it } from "vitest";
import type { Run } from "../../src/logs/recording.js";
import { fittedModel } from "../../src/model/fittedModel.js";
import { seededRandom } from "../../src/num/random.js";
import type { Plant } from "../../src/plant/plant.js";
import { plantScaling } from "../../src/plant/scaling.js";
import { runPeaks } from "../../src/residual/disturbanceBound.js";
import { forEachWindow, leftoverSums } from "../../src/residual/leftover.js";
import { cart, evenTimes, piece, rover, runOf } from "./invented.js";

/** Every window mean of every channel, with the times of its ends. */
function windowMeans(plant: Plant, run: Run, window: number) {
  const model = fittedModel(plant, null);
  const found: { mean: Float64Array; from: number; to: number }[] = [];
  for (const { time, channels } of leftoverSums(model, plantScaling(plant), run)) {
    forEachWindow(time, channels, model.p, window, (mean, start, end) => {
      found.push({ mean: mean.slice(), from: time[start]!, to: time[end]! });
    });
  }
  return found;
}

describe("the leftover by windows", () => {
  it("is a constant push exactly, at any step and with uneven samples", () => {
    const push = 0.17;
    const random = seededRandom(3);
    let t = 2;
    const uneven = Float64Array.from({ length: 200 }, () => {
      t += 0.01 + 0.04 * random.uniform();
      return t;
    });
    for (const time of [evenTimes(0.02, 5), evenTimes(0.1, 5), uneven]) {
      // accel 0.4 is held, so speed is linear and the trapezoid of the place exact
      const states = (s: number) => [1 + 0.5 * s + ((0.4 + push) * s * s) / 2, 0.5 + (0.4 + push) * s];
      const means = windowMeans(
        cart(),
        runOf(
          "r",
          piece(time, states, () => [0.4]),
        ),
        0.5,
      );
      expect(means.length).toBeGreaterThan(30);
      for (const { mean } of means) expect(mean[0]).toBeCloseTo(push, 10);
    }
  });

  it("is the mean of a sine exactly where the rate does not depend on the state", () => {
    const [size, pace] = [0.3, 2.1];
    const speed = (t: number) => (size / pace) * (1 - Math.cos(pace * t));
    const run = runOf(
      "r",
      piece(
        evenTimes(0.05, 6),
        (t) => [0, speed(t)],
        () => [0],
      ),
    );
    const means = windowMeans(cart(), run, 0.7);
    expect(means).toHaveLength(121 - 14);
    for (const { mean, from, to } of means) {
      const exact = (size * (Math.cos(pace * from) - Math.cos(pace * to))) / (pace * (to - from));
      expect(mean[0]).toBeCloseTo(exact, 10);
    }
  });

  it("errs by the trapezoid alone: order 2 in the step, with the constant h^2/12 [d/dt f]", () => {
    // speed' = -0.8 speed^2 + push with speed = 1 + sin t: the leftover of a window is
    // [speed]/T + 0.8/T integral of 1 + 2 sin t + sin^2 t
    const plant = cart({ speed: "accel - 0.8 * speed^2" });
    const primitive = (t: number) => 1.5 * t - 2 * Math.cos(t) - Math.sin(2 * t) / 4;
    const worst = (step: number): number[] => {
      const run = runOf(
        "r",
        piece(
          evenTimes(step, 5),
          (t) => [0, 1 + Math.sin(t)],
          () => [0],
        ),
      );
      let [error, beyond] = [0, 0];
      for (const { mean, from, to } of windowMeans(plant, run, 0.4)) {
        const exact = (Math.sin(to) - Math.sin(from) + 0.8 * (primitive(to) - primitive(from))) / (to - from);
        // Euler-Maclaurin: trapezoid - integral = h^2/12 [f'] + O(h^4), f = -0.8 (1 + sin t)^2
        const slope = (t: number) => -1.6 * (1 + Math.sin(t)) * Math.cos(t);
        const first = (-(step ** 2) / 12) * ((slope(to) - slope(from)) / (to - from));
        error = Math.max(error, Math.abs(mean[0]! - exact));
        beyond = Math.max(beyond, Math.abs(mean[0]! - exact - first));
      }
      return [error, beyond];
    };
    const [coarse, fine, finest] = [worst(0.1), worst(0.05), worst(0.025)];
    expect(coarse[0]! / fine[0]!).toBeCloseTo(4, 1);
    expect(fine[0]! / finest[0]!).toBeCloseTo(4, 1);
    expect(coarse[1]! / fine[1]!).toBeGreaterThan(14);
  });

  it("reads G at the state of each step: slips of a turning rover in its own frame", () => {
    const [turn, along, across, drift, speed, h] = [0.55, 0.11, -0.07, 0.03, 1.2, 0.1];
    const yaw = turn + drift;
    // px' + i py' = (speed + along + i across) e^{i yaw t}, integrated in closed form
    const states = (t: number): number[] => {
      const [s, c] = [Math.sin(yaw * t) / yaw, (1 - Math.cos(yaw * t)) / yaw];
      return [(speed + along) * s - across * c, (speed + along) * c + across * s, yaw * t, speed];
    };
    const run = runOf(
      "r",
      piece(evenTimes(h, 8), states, () => [0, turn]),
    );
    // One step seen from its first heading, phi = yaw h / 2: the integral is the rate times sinc(phi) turned by phi, the
    // trapezoid of the prior cos(phi) times speed turned by phi.
    const phi = (yaw * h) / 2;
    const sinc = Math.sin(phi) / phi;
    const [forward, sideways] = [(speed + along) * sinc - speed * Math.cos(phi), across * sinc];
    const expected = [
      forward * Math.cos(phi) - sideways * Math.sin(phi),
      forward * Math.sin(phi) + sideways * Math.cos(phi),
      drift,
    ];
    // over 8 s the heading turns by 4.6 rad: a frame held over a window, let alone the world's, would be far off
    for (const window of [0.1, 1, 3]) {
      for (const { mean } of windowMeans(rover(), run, window)) {
        for (const [c, value] of expected.entries()) expect(mean[c]).toBeCloseTo(value, 10);
      }
    }
    // the frame of the first sample lags by half a step's turn, phi: an error of first order in the step
    const error = Math.hypot(expected[0]! - along, expected[1]! - across);
    expect(error).toBeLessThan(phi * Math.hypot(along, across) + (speed * phi * phi) / 2);
  });

  it("keeps apart what no channel explains", () => {
    // the place slips at 0.2 m/s, which the one channel (on the speed) does not reach
    const plant = cart();
    const scaling = plantScaling(plant);
    const run = runOf(
      "r",
      piece(
        evenTimes(0.1, 2),
        (t) => [1.2 * t + 0.05 * t * t, 1 + 0.1 * t],
        () => [0],
      ),
    );
    const [sums] = leftoverSums(fittedModel(plant, null), scaling, run);
    const last = sums!.time.length - 1;
    expect(sums!.channels[last]).toBeCloseTo(0.1 * 2, 10);
    expect(sums!.rates[2 * last]! * scaling.stateHalf[0]!).toBeCloseTo(0.2 * 2, 10);
    expect(sums!.rates[2 * last + 1]! * scaling.stateHalf[1]!).toBeCloseTo(0.1 * 2, 10);
    expect(sums!.outside[2 * last]! * scaling.stateHalf[0]!).toBeCloseTo(0.2 * 2, 10);
    expect(sums!.outside[2 * last + 1]!).toBeCloseTo(0, 10);
  });

  it("never lets a window cross a gap between the pieces of a run", () => {
    const part = (start: number, speed: number, push: number) =>
      piece(
        evenTimes(0.1, 2).map((t) => t + start),
        (t) => [0, speed + push * (t - start)],
        () => [0],
      );
    const run = runOf("r", part(0, 0, 0.1), part(2.5, 2, -0.2), part(5, 1, 0.15));
    const means = windowMeans(cart(), run, 0.5);
    expect(means).toHaveLength(3 * (21 - 5));
    for (const { mean, from, to } of means) {
      expect(Math.floor(from / 2.5)).toBe(Math.floor(to / 2.5));
      expect(mean[0]).toBeCloseTo([0.1, -0.2, 0.15][Math.floor(from / 2.5)]!, 10);
    }
    const peaks = runPeaks(fittedModel(cart(), null), plantScaling(cart()), run, 0.5);
    expect(peaks![0]).toBeCloseTo(0.2, 10);
  });

  it("has no windows in pieces shorter than one", () => {
    const short = (samples: number) =>
      piece(
        evenTimes(0.1, 0.1 * (samples - 1)),
        () => [0, 0],
        () => [0],
      );
    const none = { time: new Float64Array(0), states: new Float64Array(0), inputs: new Float64Array(0) };
    expect(windowMeans(cart(), runOf("r", short(5), none, short(1)), 0.5)).toEqual([]);
    expect(windowMeans(cart(), runOf("r", short(6)), 0.5)).toHaveLength(1);
    expect(runPeaks(fittedModel(cart(), null), plantScaling(cart()), runOf("r", short(5)), 0.5)).toBeNull();
  });
});
