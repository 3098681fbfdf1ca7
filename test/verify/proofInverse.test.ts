import { describe, expect, it } from "vitest";
import { cholesky, solveLower } from "../../src/num/dense.js";
import { seededRandom } from "../../src/num/random.js";
import { type Node, taylorGraph } from "../../src/num/taylorGraph.js";
import { columnNodes, inverseForms } from "../../src/verify/proof/inverseForms.js";

describe("g^T W^-1 g over a cell", () => {
  it("is below form + remainder at every point, and the remainder alone bounds what y leaves over", () => {
    const random = seededRandom(51);
    const n = 3;
    let bounded = 0;
    let close = 0;
    for (let trial = 0; trial < 150; trial++) {
      const graph = taylorGraph(2);
      const z = [graph.variable(0), graph.variable(1)];
      const table = (rows: number): number[][] =>
        Array.from({ length: rows }, () => [random.normal(), 0.6 * random.normal(), 0.6 * random.normal()]);
      const [L, gTable] = [table(n * n), table(n)];
      const affine = ([a, b, c]: number[]): Node =>
        graph.sum(
          [
            { weight: b!, left: z[0]! },
            { weight: c!, left: z[1]! },
          ],
          a!,
        );
      const factor = L.map(affine);
      const W = Array.from({ length: n * n }, (_, at) => {
        const [i, j] = [Math.floor(at / n), at % n];
        const terms = [0, 1, 2].map((k) => ({ weight: 1, left: factor[i * n + k]!, right: factor[j * n + k]! }));
        return graph.sum(terms, i === j ? 1 : 0);
      });
      const column = columnNodes(graph, gTable.map(affine));
      const out = graph.scratch(1)[0]!;
      const evaluator = graph.evaluator("cells");
      const inverse = inverseForms(evaluator, W, n);
      const centre = Float64Array.of(random.normal(), random.normal());
      const radius = Float64Array.of(0.5 * 2 ** -random.integer(6), 0.5 * 2 ** -random.integer(6));
      evaluator.run(centre, radius);
      if (!inverse.prepare()) continue;
      bounded++;
      const remainder = inverse.solve(column);
      inverse.form(column, column, out);
      const upper = evaluator.kernel.upper(evaluator.M, evaluator.at(out)) + remainder;
      let most = 0;
      let mostRemainder = 0;
      for (let point = 0; point < 40; point++) {
        const t = [0, 1].map((i) => (point < 4 ? 2 * ((point >> i) & 1) - 1 : 2 * random.uniform() - 1));
        const x = t.map((v, i) => centre[i]! + radius[i]! * v);
        const at = ([a, b, c]: number[]): number => a! + b! * x[0]! + c! * x[1]!;
        const here = new Float64Array(n * n);
        for (let i = 0; i < n; i++)
          for (let j = 0; j < n; j++)
            here[i * n + j] =
              [0, 1, 2].reduce((sum, k) => sum + at(L[i * n + k]!) * at(L[j * n + k]!), 0) + (i === j ? 1 : 0);
        const g = Float64Array.from(gTable, at);
        const y = column.y.map((node) => {
          const o = evaluator.at(node);
          return evaluator.M[o]! + evaluator.M[o + 1]! * t[0]! + evaluator.M[o + 2]! * t[1]!;
        });
        const r = g.map((v, i) => v - y.reduce((sum, yj, j) => sum + here[i * n + j]! * yj, 0));
        const lower = new Float64Array(n * n);
        cholesky(here, lower, n);
        const norm = (v: Float64Array): number => {
          solveLower(lower, v, n);
          return v.reduce((sum, a) => sum + a * a, 0);
        };
        most = Math.max(most, norm(g));
        mostRemainder = Math.max(mostRemainder, norm(r));
      }
      expect(most).toBeLessThanOrEqual(upper * (1 + 1e-12));
      expect(mostRemainder).toBeLessThanOrEqual(remainder * (1 + 1e-9) + 1e-25);
      if (upper < 1.2 * most) close++;
    }
    expect(bounded).toBeGreaterThan(60);
    expect(close).toBeGreaterThan(30);
  });
});
