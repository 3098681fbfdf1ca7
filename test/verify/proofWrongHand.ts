// Certificates of small hand-made plants that are wrong on purpose, each in its own way, with the closed form or the reason.
import type { Plant, Symmetry } from "../../src/plant/plant.js";
import type { ProofClaims, ProofSubject } from "../../src/verify/proof/claims.js";
import { constantFile, formulaMetric, type HandPlant, handPlant, threeState } from "./proofPlants.js";

export interface Wrong {
  readonly name: string;
  readonly subject: () => ProofSubject;
  readonly claims: ProofClaims;
  /** Why it may be refused without a refuted point: thrown, or left open. Default: refuted. */
  readonly end?: "throws" | "open";
}

export const only = (rate: number): ProofClaims => ({ rate, pushes: [], spreads: [], authority: null });
export const IDENTITY2 = constantFile([
  [1, 0],
  [0, 1],
]);
const box = [-1, 1] as const;
export const plain = (plant: Plant, metric: ProofSubject["metric"] = IDENTITY2): ProofSubject => ({
  plant,
  residual: null,
  metric,
});

/** x' = -x, y' = -2 y: with W = I the rate is 1 exactly. */
export const twoRates = (change: Partial<HandPlant> = {}): Plant =>
  handPlant({ states: { x: box, y: box }, f: ["-x", "-2*y"], ...change });

const justAbove: Wrong[] = [1e-2, 1e-4, 1e-6, 1e-9, 1e-12].map((by) => ({
  name: `rate ${by} above the true one`,
  subject: () => plain(twoRates()),
  claims: only(1 + by),
}));

/** Double integrator of the closed forms in proof.test.ts. */
const INTEGRATOR = (): ProofSubject =>
  plain(
    handPlant({ states: { x: box, v: box }, inputs: { u: box }, f: ["v", "0"], B: [["0"], ["1"]], G: [["0"], ["1"]] }),
    constantFile([
      [1, -0.7],
      [-0.7, 1.9],
    ]),
  );
const M22 = 1 / (1.9 - 0.49);
const EXACT = {
  sigma: 0.3 * Math.sqrt(M22),
  authority: (2 * 0.4 * 1.9 + (1.9 - 2 * 0.4 * 0.7) ** 2 / (2 * 0.7 - 2 * 0.4)) * Math.sqrt(M22),
};
const justBelow: Wrong[] = [1e-2, 1e-5, 1e-9].flatMap((by): Wrong[] => {
  const f = 1 - by;
  return [
    {
      name: `sigma ${by} too small`,
      subject: INTEGRATOR,
      claims: { ...only(0.6), pushes: [{ wbar: [0.3], most: EXACT.sigma * f }] },
    },
    {
      name: `spread ${by} too small`,
      subject: INTEGRATOR,
      claims: { ...only(0.6), spreads: [{ direction: { kind: "state", state: 1 }, most: 1.9 * f }] },
    },
    {
      name: `authority ${by} too small`,
      subject: INTEGRATOR,
      claims: { ...only(0.6), authority: { rate: 0.4, most: EXACT.authority * f } },
    },
  ];
});

/** A narrow bump in the rate of x: its slope, 0.858 at most, takes the rate from 1 below 0.5 in about w^2/8 of the box. */
export const bump = (x0: number, y0: number, w: number): Plant =>
  twoRates({ f: [`-x + ${w}*exp(-((x - (${x0}))^2 + (y - (${y0}))^2)/${w * w})`, "-2*y"] });
export const POCKETS: [number, number, number][] = [
  [0.313, -0.727, 0.05],
  [-0.911, 0.133, 0.03],
  [0.777, 0.881, 0.03],
  [-0.3333, -0.1234, 0.01],
  [0.54321, 0.12345, 0.005],
  [0.999, -0.999, 0.005],
  [-0.71828, 0.31415, 0.002],
  [0.000123, 0.000321, 0.001],
];
const pockets: Wrong[] = POCKETS.map(([x, y, w]) => ({
  name: `pocket of ${(w * w) / 8} of the box at (${x}, ${y})`,
  subject: () => plain(bump(x, y, w)),
  claims: only(0.5),
}));

/** A(v) = diag(-1 + .3 s u + .3 t v, -2): only the corner (s, t) is slow. */
export const corners: Wrong[] = [
  [1, 1],
  [1, -1],
  [-1, 1],
  [-1, -1],
].flatMap(([s, t]): Wrong[] => {
  const subject = (): ProofSubject => ({
    plant: handPlant({
      states: { x: box, y: box, a: box, b: box },
      inputs: { u: box, v: box },
      f: ["-x", "-2*y", "-a", "-b"],
      B: [
        [`${0.3 * s!}*x`, `${0.3 * t!}*x`],
        ["0", "0"],
        ["1", "0"],
        ["0", "1"],
      ],
      G: [["1"], ["0"], ["0"], ["0"]],
    }),
    residual: null,
    metric: constantFile([
      [1, 0, 0, 0],
      [0, 1, 0, 0],
      [0, 0, 1, 0],
      [0, 0, 0, 1],
    ]),
  });
  return [{ name: `input corner (${s}, ${t}) forgotten`, subject, claims: only(0.6) }];
});

/** A metric by formula on the 3-state example, its rate 0.6 proved elsewhere; the changes break it. */
export const example = threeState(1.5);
const mirrored = formulaMetric([
  ["1.307801", "3*z0*1.307801 + 0.183259", "-0.249085"],
  ["3*z0*1.307801 + 0.183259", "(3*z0)^2*1.307801 + 2*3*z0*0.183259 + 0.723295", "-3*z0*0.249085 + 0.080072"],
  ["-0.249085", "-3*z0*0.249085 + 0.080072", "0.658313"],
]);
const frozen = constantFile([
  [1.307801, 0.183259, -0.249085],
  [0.183259, 0.723295, 0.080072],
  [-0.249085, 0.080072, 0.658313],
]);
/** Negative of the rates: what a flipped sign of the directional derivative would be right for. */
const derivative: Wrong[] = [
  {
    name: "directional derivative with the wrong sign",
    subject: () => ({ ...example, residual: null, metric: mirrored }),
    claims: only(0.6),
  },
  {
    name: "directional derivative forgotten",
    subject: () => ({ ...example, residual: null, metric: frozen }),
    claims: only(0.6),
  },
  {
    name: "a rate that no metric of the example has",
    subject: () => ({ ...example, residual: null }),
    claims: only(1.1),
  },
  {
    name: "the example on a larger box than it was checked on",
    subject: () => ({ plant: threeState(3).plant, residual: null, metric: example.metric }),
    claims: only(0.6),
  },
  {
    name: "derivative of W along f forgotten: W shrinks where the flow carries it",
    subject: () =>
      plain(
        handPlant({ states: { x: box, y: box }, f: ["-x", "-y"] }),
        formulaMetric([
          ["exp(2*z0)", "0"],
          ["0", "1"],
        ]),
      ),
    claims: only(0.9),
  },
  {
    name: "derivative of W along an input forgotten",
    subject: () =>
      plain(
        handPlant({
          states: { x: box, y: box },
          inputs: { u: [-3, 3] },
          f: ["-x", "-y"],
          B: [["0"], ["1"]],
          G: [["1"], ["0"]],
        }),
        formulaMetric([
          ["2 + z1", "0"],
          ["0", "1"],
        ]),
      ),
    claims: only(0.5),
  },
  {
    name: "slope of the input gain forgotten",
    subject: () =>
      plain(
        handPlant({
          states: { x: box, y: box },
          inputs: { u: [-2, 2] },
          f: ["-x", "-y"],
          B: [["0.5*x"], ["1"]],
          G: [["1"], ["0"]],
        }),
      ),
    claims: only(0.9),
  },
];

const ROTATION: Symmetry = { translation: [0, 1], rotation: { position: [0, 1], heading: 2 } };
export const unicycle = (change: Partial<HandPlant> = {}, symmetry = ROTATION): Plant =>
  handPlant({
    states: { px: [-5, 5], py: [-5, 5], h: [-3, 3], s: [0.5, 1.5] },
    inputs: { turn: box, drive: box },
    f: ["s*cos(h)", "s*sin(h)", "0", "0"],
    B: [
      ["0", "0"],
      ["0", "0"],
      ["1", "0"],
      ["0", "1"],
    ],
    G: [["cos(h)"], ["sin(h)"], ["0"], ["0"]],
    symmetry,
    ...change,
  });
export const BODY = constantFile([
  [0.1, 0, 0, -0.12],
  [0, 0.1, -0.15, 0],
  [0, -0.15, 0.6, 0],
  [-0.12, 0, 0, 0.5],
]);
const symmetries: Wrong[] = [
  {
    name: "spin of the body frame forgotten",
    subject: () => plain(unicycle({ inputs: { turn: [-9, 9], drive: box } }), BODY),
    claims: only(0.6),
  },
  {
    name: "a cyclic coordinate that a rate reads",
    subject: () => plain(unicycle({ f: ["s*cos(h) + 0.01*px", "s*sin(h)", "0", "0"] }), BODY),
    claims: only(-5),
    end: "throws",
  },
  {
    name: "a wind in the world frame under a declared rotation",
    subject: () => plain(unicycle({ f: ["s*cos(h) + 0.3", "s*sin(h)", "0", "0"] }), BODY),
    claims: only(-5),
    end: "throws",
  },
  {
    name: "a heading that turns the wrong way",
    subject: () => plain(unicycle({ f: ["s*cos(h)", "-s*sin(h)", "0", "0"] }), BODY),
    claims: only(-5),
    end: "throws",
  },
  {
    name: "a drive that depends on the heading",
    subject: () =>
      plain(
        unicycle({
          B: [
            ["0", "0"],
            ["0", "0"],
            ["1", "0"],
            ["0", "1 + 0.5*sin(h)"],
          ],
        }),
        BODY,
      ),
    claims: only(-5),
    end: "throws",
  },
  {
    name: "a disturbance fixed in the world frame",
    subject: () => plain(unicycle({ G: [["1"], ["0"], ["0"], ["0"]] }), BODY),
    claims: { ...only(-5), pushes: [{ wbar: [1], most: 1e9 }] },
    end: "throws",
  },
];

const definiteness: Wrong[] = [
  {
    name: "an indefinite constant metric",
    subject: () =>
      plain(
        twoRates(),
        constantFile([
          [1, 2],
          [2, 1],
        ]),
      ),
    claims: only(-1e3),
  },
  {
    name: "a negative metric",
    subject: () =>
      plain(
        twoRates(),
        constantFile([
          [-1, 0],
          [0, -1],
        ]),
      ),
    claims: only(-1e3),
  },
  {
    name: "a singular metric",
    subject: () =>
      plain(
        twoRates(),
        constantFile([
          [1, 1],
          [1, 1],
        ]),
      ),
    claims: only(-1e3),
    end: "open",
  },
  {
    name: "a metric that loses its sign in a corner",
    subject: () =>
      plain(
        twoRates(),
        formulaMetric([
          ["1", "0"],
          ["0", "1.9 - z0 - z1"],
        ]),
      ),
    claims: only(-1e3),
  },
  {
    name: "a metric that loses its sign in a pocket",
    subject: () =>
      plain(
        twoRates(),
        formulaMetric([
          ["1", "0"],
          ["0", "1 - 1.1*exp(-((z0 - 0.3)^2 + (z1 + 0.6)^2)/0.001)"],
        ]),
      ),
    claims: only(-1e3),
  },
];

const undefinedRates: Wrong[] = [
  {
    name: "a rate that divides by zero inside",
    subject: () => plain(twoRates({ f: ["-x", "-2*y + 0.001/(x - 0.3)"] })),
    claims: only(-10),
    end: "open",
  },
  {
    name: "a logarithm of a negative number inside",
    subject: () => plain(twoRates({ f: ["-x", "-2*y + 0.01*log(x + 0.9)"] })),
    claims: only(-10),
    end: "open",
  },
  {
    name: "a root that ends inside",
    subject: () => plain(twoRates({ f: ["-x", "-2*y + 0.01*sqrt(x + 0.5)"] })),
    claims: only(-10),
    end: "open",
  },
  {
    name: "an angle that jumps inside",
    subject: () => plain(twoRates({ f: ["-x + 0.001*atan2(y, x - 0.5)", "-2*y"] })),
    claims: only(-10),
    end: "open",
  },
  {
    name: "an input that loses its effect inside",
    subject: () =>
      plain(
        handPlant({ states: { x: box, v: box }, inputs: { u: box }, f: ["-2*x", "-2*v"], B: [["0"], ["v + 0.3"]] }),
      ),
    claims: only(0.5),
    end: "open",
  },
  {
    name: "an input without any effect",
    subject: () =>
      plain(handPlant({ states: { x: box, v: box }, inputs: { u: box }, f: ["-2*x", "-2*v"], B: [["0"], ["0"]] })),
    claims: only(0.5),
    end: "throws",
  },
  {
    name: "a kink steeper on one side",
    subject: () => plain(twoRates({ f: ["-x + 0.6*abs(x)", "-2*y"] })),
    claims: only(0.5),
  },
];

export const HAND_MADE: readonly Wrong[] = [
  ...justAbove,
  ...justBelow,
  ...pockets,
  ...corners,
  ...derivative,
  ...symmetries,
  ...definiteness,
  ...undefinedRates,
];
