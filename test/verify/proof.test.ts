import { describe, expect, it } from "vitest";
import { cholesky, symmetricEigen, whiten } from "../../src/num/dense.js";
import { seededRandom } from "../../src/num/random.js";
import { cellProver } from "../../src/verify/proof/cellProver.js";
import type { ProofClaims } from "../../src/verify/proof/claims.js";
import { leafSearch } from "../../src/verify/proof/leafSearch.js";
import { proofWorkers } from "../../src/verify/proof/proofWorkers.js";
import { type BatchExaminer, prove } from "../../src/verify/proof/prove.js";
import { recheck } from "../../src/verify/proof/recheck.js";
import { constantFile, formulaMetric, handPlant, threeState } from "./proofPlants.js";

const only = (rate: number): ProofClaims => ({ rate, pushes: [], spreads: [], authority: null });

describe("linear plants", () => {
  // With constant A, B and W the rate is -1/2 eigmax(N^T (AW + WA^T) N, N^T W N), N a basis of null(B^T).
  it("proves the eigenvalue answer and refutes a rate above it", async () => {
    const random = seededRandom(11);
    for (let trial = 0; trial < 10; trial++) {
      const n = 2 + (trial % 3);
      const A = Array.from({ length: n }, () => Array.from({ length: n }, () => random.normal()));
      const L = Array.from({ length: n }, (_, i) =>
        Array.from({ length: n }, (_, j) => (j < i ? random.normal() : j === i ? 1 + random.uniform() : 0)),
      );
      const W = L.map((a) => L.map((b) => a.reduce((sum, v, k) => sum + v * b[k]!, 0)));
      const names = Array.from({ length: n }, (_, i) => `x${i}`);
      const plant = handPlant({
        states: Object.fromEntries(names.map((name) => [name, [-1, 1] as const])),
        inputs: { u: [-1, 1] },
        f: A.map((row) => row.map((a, j) => `(${a})*x${j}`).join(" + ")),
        B: names.map((_, i) => [i === n - 1 ? "1" : "0"]),
      });
      const k = n - 1;
      const C = new Float64Array(k * k);
      const Wk = new Float64Array(k * k);
      for (let i = 0; i < k; i++) {
        for (let j = 0; j < k; j++) {
          Wk[i * k + j] = W[i]![j]!;
          for (let l = 0; l < n; l++) C[i * k + j]! += A[i]![l]! * W[l]![j]! + A[j]![l]! * W[l]![i]!;
        }
      }
      const factor = new Float64Array(k * k);
      cholesky(Wk, factor, k);
      whiten(factor, C, k, new Float64Array(k));
      const values = new Float64Array(k);
      symmetricEigen(C, k, values, null);
      const rate = -Math.max(...values) / 2;
      const metric = constantFile(W);
      const slightly = 1e-9 * (1 + Math.abs(rate));
      const held = await prove({ plant, residual: null, metric }, only(rate - slightly));
      expect(held.status).toBe("proved");
      expect(held.boxes).toBe(1);
      expect(held.provedRate).toBeGreaterThanOrEqual(rate - slightly);
      expect(held.provedRate).toBeLessThanOrEqual(rate);
      const refused = await prove({ plant, residual: null, metric }, only(rate + slightly));
      expect(refused.status).toBe("refuted");
      expect(refused.provedShare).toBe(0);
    }
  });

  // Double integrator, W = [[1, -a], [-a, b]]: rate a, rho and the density by the Schur complement by hand.
  it("proves sigma, the spreads and the authority of a double integrator to the gap", async () => {
    const [a, b, lambda] = [0.7, 1.9, 0.4];
    const plant = handPlant({
      states: { x: [-1, 1], v: [-1, 1] },
      inputs: { u: [-1, 1] },
      f: ["v", "0"],
      B: [["0"], ["1"]],
      G: [["0"], ["1"]],
    });
    const metric = constantFile([
      [1, -a],
      [-a, b],
    ]);
    const m22 = 1 / (b - a * a);
    const rho = 2 * lambda * b + (b - 2 * lambda * a) ** 2 / (2 * a - 2 * lambda);
    const exact = { sigma: 0.3 * Math.sqrt(m22), authority: rho * Math.sqrt(m22) };
    const claims = (factor: number): ProofClaims => ({
      rate: a - 1e-6,
      pushes: [{ wbar: [0.3], most: exact.sigma * factor }],
      spreads: [
        { direction: { kind: "state", state: 0 }, most: factor },
        { direction: { kind: "state", state: 1 }, most: b * factor },
      ],
      authority: { rate: lambda, most: exact.authority * factor },
    });
    const held = await prove({ plant, residual: null, metric }, claims(1 + 1e-6));
    expect(held.status).toBe("proved");
    expect(held.worst.pushes[0]! / exact.sigma).toBeCloseTo(1, 5);
    expect(held.worst.authority / exact.authority).toBeCloseTo(1, 5);
    expect(held.worst.spreads[1]! / b).toBeCloseTo(1, 9);
    for (const short of ["push", "authority", "spread"] as const) {
      const good = claims(1 + 1e-6);
      const bad = claims(1 - 1e-6);
      const mixed: ProofClaims = {
        ...good,
        ...(short === "push" ? { pushes: bad.pushes } : {}),
        ...(short === "authority" ? { authority: bad.authority } : {}),
        ...(short === "spread" ? { spreads: bad.spreads } : {}),
      };
      const refused = await prove({ plant, residual: null, metric }, mixed);
      expect(refused.status).toBe("refuted");
      expect(refused.refuted[0]!.claim).toBe(short);
    }
  });
});

describe("published examples", () => {
  it("proves the 3-state example at 0.5 and refutes it at 1.1", async () => {
    const { plant, metric } = threeState(1.5);
    const held = await prove({ plant, residual: null, metric }, only(0.5));
    expect(held.status).toBe("proved");
    expect(held.provedRate).toBeGreaterThanOrEqual(0.5);
    // z1 - z2 decays at exactly 1, so no metric is faster; a sampled search found 0.85
    expect(held.provedRate).toBeLessThan(0.86);
    const refused = await prove({ plant, residual: null, metric }, only(1.1), { maxBoxes: 2000 });
    expect(refused.status).toBe("refuted");
    expect(refused.provedRate === null || refused.provedRate < 1).toBe(true);
  });

  // Moore-Greitzer compressor: the trace of the Jacobian is positive between the roots, so every constant metric expands.
  it("refutes constant metrics of the uncontrolled compressor", async () => {
    const plant = handPlant({
      states: { phi: [-1.57, -0.43], psi: [-1, 1] },
      f: ["-psi - 1.5*phi^2 - 0.5*phi^3", "3*phi - psi"],
    });
    const random = seededRandom(5);
    for (let i = 0; i < 20; i++) {
      const [p, q] = [Math.exp(random.normal()), Math.exp(random.normal())];
      const r = (2 * random.uniform() - 1) * 0.95 * Math.sqrt(p * q);
      const metric = constantFile([
        [p, r],
        [r, q],
      ]);
      const result = await prove({ plant, residual: null, metric }, only(0), { maxBoxes: 2000 });
      expect(result.status).toBe("refuted");
    }
  });
});

describe("the search", () => {
  const { plant, metric } = threeState(1.5);
  const subject = { plant, residual: null, metric };
  it("leaves open what an early stop did not reach, and takes it up again to the same end", async () => {
    const whole = await prove(subject, only(0.6));
    expect(whole.status).toBe("proved");
    const cut = await prove(subject, only(0.6), { maxBoxes: 5 });
    expect(cut.status).toBe("open");
    expect(cut.provedShare + cut.openShare).toBe(1);
    expect(cut.openShare).toBeGreaterThan(0);
    expect(cut.provedRate === null || cut.provedRate <= whole.provedRate!).toBe(true);
    expect(recheck(subject, only(0.6), cut.leaves).holds).toBe(false);
    const resumed = await prove(subject, only(0.6), { resume: cut.leaves });
    expect(resumed.status).toBe("proved");
    expect(resumed.provedRate).toBe(whole.provedRate);
    expect(recheck(subject, only(0.6), resumed.leaves)).toMatchObject({ holds: true, faults: [] });
  });
  it("stops on a signal with everything open", async () => {
    const stop = new AbortController();
    stop.abort();
    const result = await prove(subject, only(0.6), { signal: stop.signal });
    expect(result).toMatchObject({ status: "open", openShare: 1, provedShare: 0 });
  });
  it("gives the same table twice", async () => {
    const [first, second] = [await prove(subject, only(0.7)), await prove(subject, only(0.7))];
    expect(second.leaves).toEqual(first.leaves);
  });
  it("refuses a metric that is not positive definite somewhere", async () => {
    const wrong = formulaMetric([
      ["1", "0", "0"],
      ["0", "z0 + 0.9", "0"],
      ["0", "0", "1"],
    ]);
    const result = await prove({ plant, residual: null, metric: wrong }, only(-100), { maxBoxes: 500 });
    expect(result.status).toBe("refuted");
    expect(result.refuted.some(({ claim }) => claim === "definite")).toBe(true);
  });
  it("does not pass a plant whose input loses its effect inside the envelope", async () => {
    const stuck = handPlant({
      states: { x: [-1, 1], v: [-1, 1] },
      inputs: { u: [-1, 1] },
      f: ["-2*x", "-2*v"],
      B: [["0"], ["v + 0.3"]],
    });
    const identity = constantFile([
      [1, 0],
      [0, 1],
    ]);
    const result = await prove({ plant: stuck, residual: null, metric: identity }, only(0.5), { maxBoxes: 500 });
    expect(result.status).not.toBe("proved");
  });
});

describe("around the search", () => {
  const { plant, metric } = threeState(1.5);
  const subject = { plant, residual: null, metric };
  it("needs no worker: none where the code is not built or the metric is a function", () => {
    expect(proofWorkers(subject, only(0.6), 2)).toBe(null);
    expect(proofWorkers({ ...subject, metric: constantFile([[1]]) }, only(0.6), 2)).toBe(null);
  });
  it("takes results from elsewhere in any number of shares to the same table", async () => {
    const prover = cellProver(subject, only(0.7));
    const examine: BatchExaminer = async (cells) => cells.map(({ lower, upper }) => prover.examine(lower, upper));
    const [here, elsewhere] = [await prove(subject, only(0.7)), await prove(subject, only(0.7), { examine })];
    expect(elsewhere.leaves).toEqual(here.leaves);
  });
  it("finds the cells that a part of the box touches, and their worst bounds", async () => {
    const { leaves } = await prove(subject, only(0.7));
    const search = leafSearch(leaves, only(0.7));
    const random = seededRandom(2);
    for (let trial = 0; trial < 50; trial++) {
      const lower = Float64Array.from({ length: 3 }, () => 2 * random.uniform() - 1);
      const upper = lower.map((v) => Math.min(1, v + 0.3 * random.uniform()));
      const expected: number[] = [];
      for (let b = 0; b < leaves.count; b++) {
        const meets = [0, 1, 2].every(
          (i) => leaves.lower[b * 3 + i]! <= upper[i]! && leaves.upper[b * 3 + i]! >= lower[i]!,
        );
        if (meets) expected.push(leaves.rate[b]!);
      }
      expect(
        search
          .touching(lower, upper)
          .map((leaf) => leaf.bounds.rate)
          .sort(),
      ).toEqual(expected.sort());
      expect(search.worst(lower, upper)!.rate).toBe(Math.min(...expected));
    }
    expect(search.worst(Float64Array.of(0, 0, 0), Float64Array.of(0, 0, 1.1))).toBe(null);
  });
});

describe("the table", () => {
  const { plant, metric } = threeState(1.5);
  const subject = { plant, residual: null, metric };
  it("is refused when tampered, cut, overlapping or stale", async () => {
    const claims = only(0.6);
    const { leaves } = await prove(subject, claims);
    expect(leaves.count).toBeGreaterThan(4);
    const copy = () => ({
      ...leaves,
      lower: leaves.lower.slice(),
      upper: leaves.upper.slice(),
      rate: leaves.rate.slice(),
      status: leaves.status.slice(),
    });
    const faultsOf = (table: typeof leaves): readonly string[] => recheck(subject, claims, table).faults;
    expect(faultsOf(leaves)).toEqual([]);
    const faster = copy();
    faster.rate[0] = leaves.rate[0]! + 1;
    expect(faultsOf(faster)[0]).toMatch(/does not pass/);
    const slower = copy();
    slower.rate[0] = 0.1;
    expect(faultsOf(slower)[0]).toMatch(/does not pass/);
    const moved = copy();
    moved.upper[0]! -= 2 ** -40;
    expect(faultsOf(moved).length).toBe(1);
    const open = copy();
    open.status[1] = 0;
    expect(faultsOf(open)[0]).toMatch(/open/);
    const d = leaves.dimension;
    const cut = {
      ...leaves,
      count: leaves.count - 1,
      lower: leaves.lower.slice(d),
      upper: leaves.upper.slice(d),
      ...Object.fromEntries(
        (["status", "claim", "rate", "authority"] as const).map((name) => [name, leaves[name].slice(1)]),
      ),
    } as typeof leaves;
    expect(faultsOf(cut)[0]).toMatch(/no box covers|gap/);
    expect(faultsOf({ ...leaves, rate: leaves.rate.slice(1) })[0]).toMatch(/lengths/);
    const twice = copy();
    twice.lower.copyWithin(0, d, 2 * d);
    twice.upper.copyWithin(0, d, 2 * d);
    expect(faultsOf(twice).length).toBe(1);
    expect(recheck({ ...subject, plant: threeState(1.6).plant }, only(0.7), leaves).holds).toBe(false);
  });
});
