// Windows of the fit: quadrature weights against closed forms, targets against the leftover of the prior.
import { describe, expect, it } from "vitest";
import { fittedModel } from "../../src/model/fittedModel.js";
import { featuresOf } from "../../src/nets/features.js";
import { seededRandom } from "../../src/num/random.js";
import { plantScaling } from "../../src/plant/scaling.js";
import { leftoverSums } from "../../src/residual/leftover.js";
import {
  balancedWindows,
  nodeWeights,
  type PreparedPiece,
  preparePieces,
  windowShape,
  windowTarget,
} from "../../src/residual/trainingWindows.js";
import { cart, evenTimes, piece, runOf } from "./invented.js";

/** A prepared piece with one rate term and one gain term, the latter's input given. */
function prepared(time: Float64Array, input: (k: number) => number, cells?: Int32Array): PreparedPiece {
  const features = new Float32Array(time.length);
  return {
    time,
    cells: cells ?? new Int32Array(time.length),
    unexplained: new Float64Array(time.length),
    terms: [
      { features, factor: new Float64Array(time.length).fill(1) },
      { features, factor: Float64Array.from(time, (_, k) => input(k)) },
    ],
  };
}

function unevenTimes(count: number): Float64Array {
  const random = seededRandom(5);
  let t = 0;
  return Float64Array.from({ length: count }, () => {
    t += 0.01 + 0.02 * random.uniform();
    return t;
  });
}

const WEIGHTS_TOLERANCE = 2e-6; // weights are float32

describe("the shape of a window", () => {
  it.each([
    [0.02, 0.5, 0.1, { stride: 5, length: 25 }],
    [0.05, 0.5, 0.1, { stride: 2, length: 10 }],
    [0.1, 0.5, 0.1, { stride: 1, length: 5 }],
    [0.4, 0.5, 0.1, { stride: 1, length: 2 }],
  ])("at a step of %d s", (step, window, spacing, shape) => {
    expect(windowShape(step, window, spacing)).toEqual(shape);
    expect(shape.length % shape.stride).toBe(0);
  });
  it("reads a network at a fifth of the samples at 50 Hz, or nearly so", () => {
    const { length, stride } = windowShape(0.02, 0.5, 0.1);
    expect((length / stride + 1) / (length + 1)).toBeLessThan(0.24);
  });
});

describe("the weights at the nodes", () => {
  const shape = { length: 20, stride: 4 };
  const nodes = shape.length / shape.stride + 1;
  const input = (k: number) => Math.sin(1.7 * k) + 0.3;
  const made = prepared(unevenTimes(60), input);
  const { time } = made;
  const weightsOf = (start: number, term: number) => {
    const out = new Float32Array(nodes + 5).fill(7);
    nodeWeights({ piece: made, start }, term, shape, out, 3);
    expect([...out.slice(0, 3), ...out.slice(3 + nodes)]).toEqual([7, 7, 7, 7, 7]);
    return out.slice(3, 3 + nodes);
  };
  const nodeTimes = (start: number) => Array.from({ length: nodes }, (_, c) => time[start + c * shape.stride]!);

  it("sum to 1 for a rate and to the mean of the held input for a gain", () => {
    for (const start of [0, 7, 39]) {
      const duration = time[start + shape.length]! - time[start]!;
      let held = 0;
      for (let k = start; k < start + shape.length; k++) held += ((time[k + 1]! - time[k]!) * input(k)) / duration;
      const sums = [0, 1].map((term) => weightsOf(start, term).reduce((sum, q) => sum + q, 0));
      expect(Math.abs(sums[0]! - 1)).toBeLessThan(WEIGHTS_TOLERANCE);
      expect(Math.abs(sums[1]! - held)).toBeLessThan(WEIGHTS_TOLERANCE);
    }
  });

  it("are exact for terms linear in time, each step with the input that it was held at", () => {
    const line = (t: number) => 2 - 3 * t;
    for (const start of [0, 11, 39]) {
      const duration = time[start + shape.length]! - time[start]!;
      for (const term of [0, 1]) {
        let exact = 0;
        for (let k = start; k < start + shape.length; k++) {
          const [from, to] = [time[k]!, time[k + 1]!];
          // integral of the line over the step
          exact += (term === 0 ? 1 : input(k)) * (2 * (to - from) - 1.5 * (to * to - from * from));
        }
        const read = nodeTimes(start).reduce((sum, t, c) => sum + weightsOf(start, term)[c]! * line(t), 0);
        expect(Math.abs(read - exact / duration)).toBeLessThan(5 * WEIGHTS_TOLERANCE);
      }
    }
  });

  it("cost h^2/12 of the mean second derivative, h between the nodes", () => {
    const even = prepared(evenTimes(0.02, 2), () => 1);
    const fiftyHz = { length: 25, stride: 5 };
    const pace = 3;
    for (const start of [0, 20, 70]) {
      const q = new Float32Array(6);
      nodeWeights({ piece: even, start }, 0, fiftyHz, q, 0);
      const [from, to] = [even.time[start]!, even.time[start + 25]!];
      const read = Array.from(q, (weight, c) => weight * Math.cos(pace * (from + 0.1 * c))).reduce((a, b) => a + b);
      const mean = (Math.sin(pace * to) - Math.sin(pace * from)) / (pace * (to - from));
      const claimed = (0.1 ** 2 / 12) * -(pace ** 2) * mean;
      expect((read - mean) / claimed).toBeGreaterThan(0.95);
      expect((read - mean) / claimed).toBeLessThan(1.05);
    }
  });
});

describe("prepared pieces", () => {
  const plant = cart({
    speed: "accel * (1 + 0.1 * speed) - 0.3 * speed",
    unknown: "[{ rate: speed, from: [speed] }, { gain: accel, in: speed, from: [speed] }]",
  });
  const scaling = plantScaling(plant);
  const run = runOf(
    "r",
    piece(
      unevenTimes(80),
      (t) => [t * t, 1 + Math.sin(2 * t)],
      (t) => [0.5 * Math.cos(3 * t)],
    ),
  );
  const features = plant.unknowns.map((term) => featuresOf(plant, term.dependsOn));
  const [made] = preparePieces(plant, scaling, [run], [1], features) as [PreparedPiece];

  it("aim at what the prior leaves of the rate: the leftover of the prior, found by other code", () => {
    const [{ time, rates }] = leftoverSums(fittedModel(plant, null), scaling, run) as [
      ReturnType<typeof leftoverSums>[0],
    ];
    const shape = { length: 20, stride: 5 };
    for (const start of [0, 13, 59]) {
      const duration = time[start + 20]! - time[start]!;
      const left = ((rates[2 * (start + 20) + 1]! - rates[2 * start + 1]!) * scaling.stateHalf[1]!) / duration;
      expect(windowTarget({ piece: made, start }, 0, 1, shape)).toBeCloseTo(left, 10);
    }
  });

  it("hold the scaled state, and 1 or the input in SI", () => {
    const { states, inputs } = run.pieces[0]!;
    for (const k of [0, 30, 79]) {
      expect(made.terms[0]!.features[k]).toBeCloseTo((states[2 * k + 1]! - 1) / 2, 6);
      expect(made.terms[0]!.factor[k]).toBe(1);
      expect(made.terms[1]!.factor[k]).toBe(inputs[k]);
    }
  });

  it("count cells over the envelope, the outermost open to states outside", () => {
    const speeds = [-5, -0.9, -0.1, 0.1, 1, 2.3, 9];
    const at = piece(
      evenTimes(0.1, 0.6),
      (t) => [0, speeds[Math.round(10 * t)]!],
      () => [0],
    );
    const [cells] = preparePieces(plant, scaling, [runOf("r", at)], [1], features);
    expect([...cells!.cells]).toEqual([0, 0, 1, 1, 2, 4, 4]);
  });
});

describe("balanced windows", () => {
  const shape = { length: 10, stride: 5 };
  it("are drawn evenly over cells however unevenly the samples lie, and fit their piece", () => {
    // 95 % of the starts in cell 3, the rest in cells 0 and 7 of two pieces
    const long = prepared(evenTimes(0.1, 100), () => 1, new Int32Array(1001).fill(3).fill(0, 200, 230));
    const other = prepared(evenTimes(0.1, 3), () => 1, new Int32Array(31).fill(7));
    const draw = balancedWindows([long, other], shape)!;
    const random = seededRandom(11);
    const [counts, starts] = [new Map<number, number>(), new Set<number>()];
    const draws = 30_000;
    for (let i = 0; i < draws; i++) {
      const window = draw(random);
      expect(window.start + shape.length).toBeLessThan(window.piece.time.length);
      const cell = window.piece.cells[window.start]!;
      counts.set(cell, (counts.get(cell) ?? 0) + 1);
      if (cell === 7) starts.add(window.start);
    }
    // 99.99 % of a binomial share of 1/3 lies within 3.9 standard deviations
    const deviation = Math.sqrt((draws * 2) / 9);
    expect([...counts.keys()].sort()).toEqual([0, 3, 7]);
    for (const count of counts.values()) expect(Math.abs(count - draws / 3)).toBeLessThan(3.9 * deviation);
    expect([...starts].sort((a, b) => a - b)).toEqual(Array.from({ length: 21 }, (_, k) => k));
  });
  it("are none where no piece is long enough", () => {
    expect(balancedWindows([prepared(evenTimes(0.1, 0.9), () => 1)], shape)).toBeNull();
    expect(balancedWindows([prepared(evenTimes(0.1, 1), () => 1)], shape)).not.toBeNull();
    expect(balancedWindows([], shape)).toBeNull();
  });
});
