import { describe, expect, it } from "vitest";
import { formatProblems } from "../../src/plant/readPlant.js";
import { placeOf, problemsOf } from "./reading.js";

const BROKEN = `plant: broken rover
states:
  px: {unit: m, envelop: [-30, 30]}
  py: {unit: metre, envelope: [30, -30]}
  heading: {unit: deg, envelope: [-180, 180]}
  speed: {unit: m/s, envelope: [0.6, .inf]}
inputs:
  drive: {unit: m/s^2, range: [-1.5, 1.5]}
  turn: {unit: rad/s, range: [-0.6, 0.6]}
  drive: {unit: m/s^2, range: [-1, 1]}
parameters: {turnGain: one, pi: 3, px: 4}
rates:
  px: sped * cos(heading)
  py: "speed * sine(heading)"
  headin: turnGain * turn
  speed: >
    drive
      - drive * turn
unknown:
  - {rate: speed, from: [py]}
  - {gain: turn, from: [speed]}
  - {rate: speed, gain: turn, in: heading, from: []}
leftover:
  slip: {unit: m/s, on: {px: cos(heading) * turn, pz: 1}}
symmetry:
  translation: [py]
  rotation: {position: [px, px], heading: heading}
logs:
  files: []
  columns:
    yaw: {column: yaw}
    heading: {unit: m}
disturbance:
  confidence: 1.5
  split: {fit: 0.5, calibration: 0.3, test: 0.3}
margin:
  minimise: sideways
  authority: *half
  autority: 0.4
networks:
  metric: {rounds: 2.5}
`;

describe("a broken plant file", () => {
  const expected: readonly (readonly [string, RegExp, string?])[] = [
    ["broken rover", /'plant' is "broken rover"/],
    ["envelop:", /unknown key 'envelop' in 'states.px'; allowed are unit, envelope/, "envelope"],
    ["metre", /unknown unit 'metre'; allowed are/],
    ["[30, -30]", /the first must be below the second/],
    [".inf", /'states.speed.envelope.1' is Infinity/],
    ["drive: {unit: m/s^2, range: [-1, 1]}", /key 'drive' is written twice/],
    ["one,", /'parameters.turnGain' is "one"/],
    ["pi: 3", /'pi' is reserved/],
    ["px: 4", /'px' is already one of the states/],
    ["sped", /unknown name 'sped'/, "speed"],
    ["sine(", /unknown function 'sine'/, "sin"],
    ["headin:", /unknown state 'headin'/, "heading"],
    ["drive * turn", /not affine in the inputs: two parts with inputs are multiplied in 'drive \* turn'/],
    ["py]}", /'py' is cyclic/],
    ["{gain: turn, from", /needs `in`/],
    ["{rate: speed, gain", /give exactly one of rate and gain/],
    ["[]}", /'unknown.2.from' is a list of 0/],
    ["turn, pz", /may not hold an input/],
    ["pz: 1", /unknown state 'pz'/, "px"],
    ["[px, px]", /names 'px' twice/],
    ["[]\n", /'logs.files' is a list of 0/],
    ["yaw: {column", /unknown state or input 'yaw'/],
    ["m}\ndisturbance", /unit 'm' cannot be converted to deg; allowed are rad, mrad, deg/],
    ["1.5\n", /'disturbance.confidence' is 1.5/],
    ["{fit: 0.5", /adds up to 1.1/],
    ["sideways", /unknown margin 'sideways'/],
    ["*half", /alias '\*half' has no anchor/],
    ["autority", /unknown key 'autority' in 'margin'/, "authority"],
    ["2.5}", /'networks.metric.rounds' is 2.5 \(expected whole number/],
  ];
  const problems = problemsOf(BROKEN);

  it.each(expected.map(([piece, message, suggestion]) => ({ piece, message, suggestion })))(
    "$piece",
    ({ piece, message, suggestion }) => {
      const place = placeOf(BROKEN, piece);
      const found = problems.filter(({ line, column }) => line === place.line && column === place.column);
      expect(found.map((problem) => problem.message).join("\n")).toMatch(message);
      expect(found.map((problem) => problem.suggestion)).toContain(suggestion);
    },
  );

  it("has no other mistakes, told in the order of the file, one a line", () => {
    expect(problems).toHaveLength(expected.length);
    const lines = formatProblems("configs/broken.yaml", problems).split("\n");
    expect(lines).toHaveLength(expected.length);
    expect(lines[1]).toMatch(/^configs\/broken\.yaml:3:17: unknown key 'envelop'.*\(did you mean 'envelope'\?\)$/);
    expect(problems.map(({ line }) => line)).toEqual(problems.map(({ line }) => line).toSorted((a, b) => a - b));
  });
});
