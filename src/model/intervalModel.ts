/**
 * The fitted model (fittedModel.ts) as nodes of a Taylor graph, in scaled states z and inputs v, at heading zero and with
 * cyclic coordinates at their centre. The float64 numbers of the scaling, the plant file and the networks are taken as
 * exact; ratios of half-ranges are enclosed.
 *   f_i = (f_i(x) + sum_j c_j B_ij(x)) / h_i,  B_ij = e_j B_ij(x) / h_i,  G_ik = G_ik(x) / h_i
 *   A_0 = df/dz, A_j = d(column j of B)/dz
 */
import { featureNetwork } from "../nets/intervalMetric.js";
import { divideIntervals, type Interval, interval } from "../num/interval.js";
import type { Node, TaylorGraph, Term } from "../num/taylorGraph.js";
import { ZERO } from "../num/taylorGraph.js";
import { differentiate } from "../plant/differentiate.js";
import type { Expression } from "../plant/expression.js";
import { expressionNode, mentionsState } from "../plant/intervalRates.js";
import type { Plant } from "../plant/plant.js";
import { activeStates, plantScaling } from "../plant/scaling.js";
import type { BodyFrame, ResidualFile } from "./controlAffine.js";

export interface ModelNodes {
  readonly n: number;
  readonly m: number;
  readonly p: number;
  /** States that the graph's variables stand for, in order. */
  readonly active: readonly number[];
  readonly rotation: BodyFrame | null;
  /** Scaled states: variables, ZERO for cyclic ones. */
  readonly z: readonly Node[];
  readonly f: readonly Node[];
  /** n x m. */
  readonly B: readonly Node[];
  /** n x p. */
  readonly G: readonly Node[];
  /** 1 + m matrices n x n. */
  readonly A: readonly (readonly Node[])[];
}

/** The graph's variables are the active states in the order of activeStates. Throws when a cyclic state is read. */
export function modelNodes(graph: TaylorGraph, plant: Plant, residual: ResidualFile | null): ModelNodes {
  const { states, inputs, leftover, expressions } = plant;
  const [n, m, p] = [states.length, inputs.length, leftover.length];
  const { stateCenter, stateHalf, inputCenter, inputHalf } = plantScaling(plant);
  const active = activeStates(plant);
  const { rotation } = plant.symmetry;
  refuseCyclic(plant, residual);
  const ratio = (a: number, b: number): Interval => divideIntervals(interval(a), interval(b));
  const within = (a: Interval): Node => (a.lo === 0 && a.hi === 0 ? ZERO : graph.constantWithin(a));

  const z = states.map((_, i): Node => {
    if (i === rotation?.heading) return within(ratio(-stateCenter[i]!, stateHalf[i]!));
    const position = active.indexOf(i);
    return position < 0 ? ZERO : graph.variable(position);
  });
  const x = states.map((_, i): Node => {
    if (i === rotation?.heading) return ZERO;
    return graph.sum([{ weight: stateHalf[i]!, left: z[i]! }], stateCenter[i]!);
  });

  const value = (e: Expression): Node => expressionNode(graph, e, x);
  /** Value and slopes in z of one rate or gain, in SI of the rate: prior and residual terms. */
  const quantity = (e: Expression, state: number, input: number | null) => {
    const parts: Term[] = [{ weight: 1, left: value(e) }];
    const slopes = states.map((_, k): Term[] => [
      { weight: stateHalf[k]!, left: value(differentiate(e, { kind: "state", index: k })) },
    ]);
    for (const term of residual?.terms ?? []) {
      if (term.state !== state || term.input !== input) continue;
      const net = featureNetwork(graph, term.mlp, term.features, z);
      parts.push({ weight: term.outputScale, left: net.values[0]! });
      net.states.forEach((k, c) => {
        slopes[k]!.push({ weight: term.outputScale, left: net.tangents[c]![0]! });
      });
    }
    return { value: graph.sum(parts), slopes: slopes.map((terms) => graph.sum(terms)) };
  };

  const drift = expressions.f.map((e, i) => quantity(e, i, null));
  const gains = expressions.B.map((row, i) => row.map((e, j) => quantity(e, i, j)));
  const per = (i: number, factor: number): Node => within(ratio(factor, stateHalf[i]!));
  const withCentre = (i: number, own: Node, ofInput: (j: number) => Node): Node =>
    graph.product(
      graph.sum([
        { weight: 1, left: own },
        ...inputs.map((_, j): Term => ({ weight: inputCenter[j]!, left: ofInput(j) })),
      ]),
      per(i, 1),
    );
  const indices = states.map((_, i) => i);
  return {
    n,
    m,
    p,
    active,
    rotation:
      rotation === null
        ? null
        : { position: rotation.position, heading: rotation.heading, headingHalf: stateHalf[rotation.heading]! },
    z,
    f: indices.map((i) => withCentre(i, drift[i]!.value, (j) => gains[i]![j]!.value)),
    B: indices.flatMap((i) => gains[i]!.map((gain, j) => graph.product(gain.value, per(i, inputHalf[j]!)))),
    G: indices.flatMap((i) => expressions.G[i]!.map((e) => graph.product(value(e), per(i, 1)))),
    A: [
      indices.flatMap((i) => indices.map((k) => withCentre(i, drift[i]!.slopes[k]!, (j) => gains[i]![j]!.slopes[k]!))),
      ...inputs.map((_, j) =>
        indices.flatMap((i) => gains[i]![j]!.slopes.map((slope) => graph.product(slope, per(i, inputHalf[j]!)))),
      ),
    ],
  };
}

/** A cyclic coordinate may occur nowhere: then leaving it out of the box loses nothing. */
function refuseCyclic(plant: Plant, residual: ResidualFile | null): void {
  const { symmetry, expressions, states } = plant;
  const cyclic = new Set([...symmetry.translation, ...(symmetry.rotation?.position ?? [])]);
  const all = [...expressions.f, ...expressions.B.flat(), ...expressions.G.flat()];
  for (const state of cyclic) {
    if (all.some((e) => mentionsState(e, state)))
      throw new Error(
        `state '${states[state]!.name}' is declared cyclic, but a rate or leftover effect reads it; no proof may leave it out: take it off the symmetry`,
      );
  }
  const reduced = new Set([...cyclic, ...(symmetry.rotation === null ? [] : [symmetry.rotation.heading])]);
  for (const term of residual?.terms ?? []) {
    const read = term.features.find((feature) => reduced.has(feature.state));
    if (read !== undefined)
      throw new Error(
        `the residual of '${states[term.state]!.name}' reads '${states[read.state]!.name}', which the declared symmetry takes out; fit it without`,
      );
  }
}
