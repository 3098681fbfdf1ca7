import { describe, expect, it } from "vitest";
import { newRatesPoint } from "../../src/plant/plant.js";
import { formatProblems } from "../../src/plant/readPlant.js";
import { BOAT, CRANE, ROVER } from "./examples.js";
import { changed, placeOf, plantOf, problemsOf } from "./reading.js";

describe("the rover example", () => {
  it("is read into SI with its structure, logs and settings", () => {
    const plant = plantOf(ROVER);
    expect(plant.states.map(({ name }) => name)).toEqual(["px", "py", "heading", "speed"]);
    expect(plant.states[2]).toMatchObject({ isAngle: true, unit: { name: "deg" } });
    expect(plant.states[2]!.max).toBeCloseTo(Math.PI, 15);
    expect(plant.states[3]).toMatchObject({ min: 0.6, max: 2.4, isAngle: false });
    expect(plant.inputs[1]).toMatchObject({ name: "turn", min: -0.6, max: 0.6 });
    expect(plant.unknowns).toEqual([
      { state: 3, input: null, dependsOn: [3] },
      { state: 2, input: 1, dependsOn: [3] },
    ]);
    expect(plant.symmetry).toEqual({ translation: [0, 1], rotation: { position: [0, 1], heading: 2 } });
    expect(plant.logs.files).toEqual(["/fields/data/orchard-rover.arrow"]);
    expect(plant.logs.states.map(({ column, unit }) => `${column} ${unit.name}`)).toEqual([
      "px m",
      "py m",
      "yaw rad",
      "speed m/s",
    ]);
    expect(plant.logs).toMatchObject({ run: "run", maxGap: 0.1, time: { column: "time", unit: { factor: 1 } } });
    expect(plant.settings).toEqual({
      confidence: 0.9,
      split: { fit: 0.5, calibration: 0.3, test: 0.2 },
      window: null,
      unsupported: "refuse",
      goal: { kind: "planar" },
      authorityLimit: 0.4,
      roomLimit: 0.5,
      initialDistance: 0,
      rate: null,
      metricDependsOn: [3],
      residualNet: { width: 16, steps: 1500 },
      metricNet: { width: 16, steps: 1500, rounds: 6 },
      seed: 1,
    });
  });

  it("has the rates of a unicycle", () => {
    const out = newRatesPoint(4, 2, 4);
    plantOf(ROVER).rates.evaluate(Float64Array.of(3, -4, 0.5, 2), out);
    const [c, s] = [Math.cos(0.5), Math.sin(0.5)];
    expect([...out.f]).toEqual([2 * c, 2 * s, 0, 0]);
    expect([...out.B]).toEqual([0, 0, 0, 0, 0, 1, 1, 0]);
    expect([...out.G]).toEqual([c, -s, 0, 0, s, c, 0, 0, 0, 0, 1, 0, 0, 0, 0, 1]);
    expect([...out.dfdx.subarray(0, 8)]).toEqual([0, 0, -2 * s, c, 0, 0, 2 * c, s]);
  });
});

describe("other plants", () => {
  it("fill in the defaults that the contract names", () => {
    const plant = plantOf(CRANE);
    expect(plant.settings).toEqual({
      ...plantOf(ROVER).settings,
      goal: { kind: "state", state: 2 },
      metricDependsOn: [1, 2, 3],
    });
    expect(plant.symmetry).toEqual({ translation: [0], rotation: null });
    expect(plant.logs).toMatchObject({ run: null, maxGap: 0.1, time: { column: "time", unit: { name: "s" } } });
    const out = newRatesPoint(4, 1, 2);
    plant.rates.evaluate(Float64Array.of(3, 1, 0.1, -0.2), out);
    expect(out.f[3]).toBeCloseTo((-9.80665 / 8) * Math.sin(0.1), 15);
    expect(out.B[3]).toBeCloseTo(-Math.cos(0.1) / 8, 15);
    expect(out.dBdx[3 * 4 + 2]).toBeCloseTo(Math.sin(0.1) / 8, 15);
  });

  it("keep the boat's damping differentiable at zero sway", () => {
    const out = newRatesPoint(6, 2, 5);
    plantOf(BOAT).rates.evaluate(Float64Array.of(0, 0, 0, 1, 0, 0), out);
    expect(out.dfdx[4 * 6 + 4]).toBeCloseTo(-60 / 130, 15);
    expect(out.dfdx[3 * 6 + 3]).toBeCloseTo(-(12 + 36) / 95, 15);
    expect(plantOf(BOAT).settings.metricDependsOn).toEqual([3, 4, 5]);
  });

  it("read values through an anchor and its alias", () => {
    const shared = changed(CRANE, ["[-12, 12]", "&swing [-12, 12]"], ["[-15, 15]", "*swing"]);
    expect(plantOf(shared).states[3]!.max).toBeCloseTo((12 * Math.PI) / 180, 15);
  });
});

describe("single mistakes", () => {
  const one = (text: string, piece: string, message: RegExp, nth = 1): void => {
    const problems = problemsOf(text);
    expect(problems.map((problem) => problem.message)).toEqual([expect.stringMatching(message)]);
    expect(problems[0]).toMatchObject(placeOf(text, piece, nth));
  };

  it("point into plain, quoted, folded and literal text, also behind CR LF", () => {
    const rate = "swayRate: -(gravity * sin(sway) + accel * cos(sway)) / rope";
    for (const written of [
      "swayRate: -(gravity * sin(swax) + accel * cos(sway)) / rope",
      "swayRate:   '-(gravity * sin(swax) + accel * cos(sway)) / rope'",
      'swayRate: "-(gravity * sin(swax)\n     + accel * cos(sway)) / rope"',
      "swayRate: >-\n    -(gravity\n    * sin(swax) + accel * cos(sway))\n     / rope",
      "swayRate: |\n\n    -(gravity * sin(swax)\n    + accel * cos(sway)) / rope",
      "swayRate: -(gravity *\n     sin(swax) + accel * cos(sway)) / rope",
    ]) {
      const text = changed(CRANE, [rate, written]);
      one(text, "swax", /unknown name 'swax'/);
      one(text.replaceAll("\n", "\r\n"), "swax", /unknown name 'swax'/);
    }
  });

  it("name what is missing at the key that lacks it", () => {
    one(
      changed(CRANE, ["trolley: {unit: m, envelope: [0, 40]}", "trolley: {unit: m}"]),
      "trolley:",
      /'envelope' is missing in 'states.trolley'/,
    );
    one(changed(CRANE, ["margin: {minimise: sway}\n", ""]), "plant:", /'margin' is missing/);
    one(changed(CRANE, ["  sway: swayRate\n", ""]), "rates:", /rate of state 'sway' is missing/);
  });

  it.each<[string, string, string, RegExp]>([
    ["{trolleySpeed: 1}", "{}", "on: {}", /acts on no rate/],
    ["{rate: swayRate, from: [sway, swayRate]}", "{rate: swayRate, from: [trolley]}", "trolley]}", /cyclic/],
    ["{rate: swayRate, from: [sway, swayRate]}", "{rate: swayRate, from: [sway, sway]}", "sway]}", /named twice/],
    ["minimise: sway", "minimise: across", "across", /needs a declared rotation/],
    ["minimise: sway", "minimise: sway, rate: fast", "fast", /'margin.rate' is "fast"/],
    ["minimise: sway", "minimise: sway, authority: 0", "0}\n", /above 0/],
    ["envelope: [-12, 12]", "envelope: [-12, .nan]", ".nan", /is NaN/],
  ])("%s -> %s", (from, to, piece, message) => {
    one(changed(CRANE, [from, to]), piece, message);
  });

  it("refuse a file without leftover channels and one whose symmetry leaves no state", () => {
    const messages = (text: string): string => formatProblems("p", problemsOf(text));
    const channels = CRANE.slice(CRANE.indexOf("leftover:"), CRANE.indexOf("symmetry:"));
    expect(messages(changed(CRANE, [channels, "leftover: {}\n"]))).toMatch(/^p:\d+:1: 'leftover' is empty; 1 to 16/);
    const all = changed(CRANE, ["[trolley]}", "[trolley, trolleySpeed, sway, swayRate]}"]);
    expect(messages(all)).toMatch(/leaves no state for the metric/);
  });

  it("refuse what a declared rotation rules out", () => {
    const turned = changed(ROVER, ["{rate: speed, from: [speed]}", "{rate: px, from: [speed]}"]);
    one(turned, "px, from", /the rate of 'px' turns with the declared rotation/);
    const shifted = changed(ROVER, ["translation: [px, py]", "translation: [px, py, heading]"]);
    one(shifted, "[px, py, heading]", /'heading' is the heading of the rotation and cannot be a translation too/);
    const straight = changed(
      ROVER,
      ["heading: {unit: deg", "heading: {unit: m"],
      ["    heading: {column: yaw, unit: rad}\n", "    heading: {column: yaw}\n"],
    );
    one(straight, "heading}", /'heading' has the unit m; a plane angle is allowed here/);
    const learnt = changed(ROVER, ["rounds: 6, from: [speed]", "rounds: 6, from: [heading, speed]"]);
    one(learnt, "heading, speed]", /'heading' is cyclic: symmetry declares a rotation over it/);
  });

  it("refuse two quantities read from one column", () => {
    const text = changed(CRANE, ["files: [", "columns: {sway: {column: swayRate}}, files: ["]);
    expect(formatProblems("p", problemsOf(text))).toMatch(/'swayRate' and 'sway' are both read from column 'swayRate'/);
  });

  it("hint at quotes where a comma cut a formula", () => {
    const text = changed(CRANE, ["{trolleySpeed: 1}", "{trolleySpeed: atan2(1, 2)}"]);
    expect(problemsOf(text)[0]!.message).toMatch(/put a formula with a comma in quotes/);
    plantOf(changed(CRANE, ["{trolleySpeed: 1}", "{trolleySpeed: 'atan2(1, 2)'}"]));
  });

  it("refuse states beyond the largest plant", () => {
    const many = Array.from({ length: 13 }, (_, i) => `x${i}`);
    const text = `plant: big\nstates:\n${many.map((x) => `  ${x}: {unit: m, envelope: [0, 1]}\n`).join("")}inputs:\n${many
      .slice(0, 5)
      .map((x) => `  u${x}: {unit: m, range: [0, 1]}\n`)
      .join(
        "",
      )}rates:\n${many.map((x, i) => `  ${x}: ${i < 5 ? `u${x}` : 0}\n`).join("")}leftover: {w: {unit: m, on: {x0: 1}}}\nlogs: {files: [a.csv]}\nmargin: {minimise: x0}\n`;
    expect(problemsOf(text).map(({ line, message }) => `${line} ${message}`)).toEqual([
      "2 13 states given; at most 12 are allowed",
      "16 5 inputs given; at most 4 are allowed",
    ]);
  });
});

describe("text that is no plant file", () => {
  it.each([
    ["", 1, 1, /must be a map of keys.*got empty/],
    ["- a\n- b\n", 1, 1, /got a list of 2/],
    ["plant: x\n\tstates: {}\n", 2, 1, /Tabs are not allowed/],
    [`${CRANE}---\nplant: second\n`, CRANE.split("\n").length, 1, /one YAML document/],
    [`${CRANE}[1]: 2\n`, CRANE.split("\n").length, 1, /cannot be a key/],
    [`${CRANE}__proto__: {polluted: 1}\n`, CRANE.split("\n").length, 1, /'__proto__' is not allowed/],
    [`${CRANE}seed: !!js/function 'x'\n`, CRANE.split("\n").length, 7, /Unresolved tag/],
    ["x".repeat(200_001), 1, 1, /at most 200000/],
    [
      `a: &a [x,x,x,x,x,x,x,x,x]\nb: &b [*a,*a,*a,*a,*a,*a,*a,*a]\nc: &c [*b,*b,*b,*b,*b,*b,*b]\nd: [*c,*c,*c,*c,*c,*c]\n`,
      1,
      1,
      /cannot be expanded/,
    ],
  ])("%#", (text, line, column, message) => {
    const problems = problemsOf(text);
    expect(problems[0]).toMatchObject({ line, column, message: expect.stringMatching(message) });
    expect(({} as { polluted?: number }).polluted).toBeUndefined();
  });
});

describe("text made to exhaust the reader", () => {
  it.each([
    [`a: ${"[".repeat(60_000)}`],
    ["{a: ".repeat(40_000)],
    ["- ".repeat(90_000)],
    ["? ".repeat(90_000)],
    [`a:\n${Array.from({ length: 400 }, (_, i) => `${" ".repeat(i + 1)}a:`).join("\n")}`],
  ])("%#: is refused in one line", (text) => {
    expect(formatProblems("p", problemsOf(text))).toMatch(/^p:\d+:\d+: maps or lists are nested more than 40 deep$/);
  });
});

describe("what only the compiled rates show", () => {
  it("refuses rates that are not finite inside the envelope", () => {
    const text = changed(CRANE, ["trolleySpeed: accel", "trolleySpeed: accel - 0.1 / trolleySpeed"]);
    expect(problemsOf(text)).toEqual([
      { ...placeOf(text, "accel - 0.1"), message: expect.stringMatching(/not finite.*trolleySpeed = 0 m\/s/) },
    ]);
    const root = changed(CRANE, ["trolley: trolleySpeed", "trolley: trolleySpeed + sqrt(1.5 + trolleySpeed)"]);
    expect(problemsOf(root)[0]!.message).toMatch(/a derivative of the formula of rate 'trolley' is not finite/);
  });

  it("refuses inputs and leftover channels that lose full column rank, by name", () => {
    const idle = changed(
      ROVER,
      ["speed: drive", "speed: drive * (heading / 4)^2"],
      ["  rotation: {position: [px, py], heading: heading}\n", ""],
      ["planar", "px"],
    );
    expect(problemsOf(idle)).toEqual([
      { ...placeOf(idle, "drive:"), message: expect.stringMatching(/input 'drive' .*full column rank/) },
    ]);
    const twice = changed(ROVER, [
      "{px: -sin(heading), py: cos(heading)}",
      "{px: 2 * cos(heading), py: 2 * sin(heading)}",
    ]);
    expect(problemsOf(twice)).toEqual([
      {
        ...placeOf(twice, "slipAcross"),
        message: expect.stringMatching(/leftover channel 'slipAcross' .*full column rank/),
      },
    ]);
  });

  it("leaves an input whose gain is to be learned to the fitted model", () => {
    plantOf(changed(ROVER, ["heading: turnGain * turn", "heading: 0 * turnGain * turn"]));
    const without = changed(
      ROVER,
      ["heading: turnGain * turn", "heading: 0 * turnGain * turn"],
      ["  - {gain: turn, in: heading, from: [speed]}\n", ""],
    );
    expect(problemsOf(without)[0]).toMatchObject(placeOf(without, "turn:"));
  });

  it("does not take a wrong symmetry on trust", () => {
    const still = changed(CRANE, ["trolleySpeed: accel", "trolleySpeed: accel * (1 + trolley / 1e6)"]);
    expect(problemsOf(still)).toEqual([
      {
        ...placeOf(still, "translation"),
        message: expect.stringMatching(/translation of 'trolley' does not hold: the effect of input 'accel'/),
      },
    ]);
    for (const [from, to, what] of [
      ["{px: cos(heading), py: sin(heading)}", "{px: 1}", /leftover channel 'slipAlong'.*let the channel turn/],
      ["px: -sin(heading), py: cos(heading)", "px: sin(heading), py: cos(heading)", /leftover channel 'slipAcross'/],
      ["py: speed * sin(heading)", "py: -speed * sin(heading)", /the rate of 'p[xy]' without inputs/],
      ["speed: drive", "speed: drive - 0.01 * sin(heading)", /the rate of 'speed' without inputs/],
      ["speed: drive", "speed: drive * (2 + cos(heading))", /the effect of input 'drive' on the rate of 'speed'/],
    ] as const) {
      const text = changed(ROVER, [from, to]);
      expect(problemsOf(text)).toEqual([{ ...placeOf(text, "rotation:"), message: expect.stringMatching(what) }]);
    }
  });

  it("finds these beside mistakes elsewhere in the file", () => {
    const text = changed(
      CRANE,
      ["trolleySpeed: accel", "trolleySpeed: accel + trolley"],
      ["minimise: sway", "minimise: swai"],
    );
    expect(problemsOf(text)).toHaveLength(2);
  });
});
