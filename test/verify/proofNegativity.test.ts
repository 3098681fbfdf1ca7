import { describe, expect, it } from "vitest";
import { symmetricEigen } from "../../src/num/dense.js";
import { seededRandom } from "../../src/num/random.js";
import { type Node, taylorGraph } from "../../src/num/taylorGraph.js";
import { negativityTest } from "../../src/verify/proof/negativity.js";

describe("negativity", () => {
  it("is never claimed for a singular whole-number matrix, however conditioned", () => {
    const random = seededRandom(41);
    for (let trial = 0; trial < 300; trial++) {
      const k = 2 + random.integer(4);
      // L with k - 1 columns: -L L^T is exactly singular
      const L = Array.from({ length: k }, () => Array.from({ length: k - 1 }, () => random.integer(200) - 100));
      const graph = taylorGraph(1);
      const nodes = L.flatMap((a) => L.map((b) => graph.constant(-a.reduce((sum, v, i) => sum + v * b[i]!, 0))));
      const evaluator = graph.evaluator("points");
      evaluator.run(new Float64Array(1), new Float64Array(1));
      const test = negativityTest(evaluator, [nodes], k);
      expect(test.test([1], 0, null).holds).toBe(false);
      expect(test.test([1], -1e-4 * 1e4, null).holds).toBe(true);
    }
  });

  it("over a cell means negative at every point, and is claimed when there is room", () => {
    const random = seededRandom(42);
    let claimed = 0;
    for (let trial = 0; trial < 200; trial++) {
      const k = 2 + random.integer(3);
      const graph = taylorGraph(2);
      const [x, y] = [graph.variable(0), graph.variable(1)];
      const coefficient = Array.from({ length: k * k }, () => Array.from({ length: 6 }, () => random.normal()));
      const shift = -1 - 3 * random.uniform() * k;
      const at = (i: number, j: number): number[] => coefficient[Math.max(i, j) * k + Math.min(i, j)]!;
      const nodes: Node[] = [];
      for (let i = 0; i < k; i++) {
        for (let j = 0; j < k; j++) {
          const [a, b, c, d, e, f] = at(i, j) as [number, number, number, number, number, number];
          nodes.push(
            graph.sum(
              [
                { weight: b, left: x },
                { weight: c, left: y },
                { weight: d, left: x, right: x },
                { weight: e, left: x, right: y },
                { weight: f, left: y, right: y },
              ],
              a + (i === j ? shift : 0),
            ),
          );
        }
      }
      const evaluator = graph.evaluator("cells");
      const centre = Float64Array.of(random.normal(), random.normal());
      const radius = Float64Array.of(0.3 * random.uniform(), 0.3 * random.uniform());
      evaluator.run(centre, radius);
      if (!negativityTest(evaluator, [nodes], k).test([1], 0, null).holds) continue;
      claimed++;
      const matrix = new Float64Array(k * k);
      const values = new Float64Array(k);
      for (let point = 0; point < 60; point++) {
        const [p, q] = [0, 1].map(
          (i) => centre[i]! + radius[i]! * (point < 4 ? 2 * ((point >> i) & 1) - 1 : 2 * random.uniform() - 1),
        ) as [number, number];
        for (let i = 0; i < k; i++) {
          for (let j = 0; j < k; j++) {
            const [a, b, c, d, e, f] = at(i, j) as [number, number, number, number, number, number];
            matrix[i * k + j] = a + b * p + c * q + d * p * p + e * p * q + f * q * q + (i === j ? shift : 0);
          }
        }
        symmetricEigen(matrix, k, values, null);
        expect(Math.max(...values)).toBeLessThan(0);
      }
    }
    expect(claimed).toBeGreaterThan(30);
  });
});
