/**
 * A few closed forms that must come out on this machine: a double integrator's rate and rho (by hand), a Clopper-Pearson
 * limit (299 trials without a failure give 1 % at 95 %: common acceptance-sampling table).
 */
import { type ControlAffineModel, newModelPoint } from "../model/controlAffine.js";
import { dualMetric } from "../nets/dualMetric.js";
import { clopperPearsonUpper } from "../num/statistics.js";
import { condition } from "../verify/condition.js";

export interface SelfCheck {
  readonly name: string;
  readonly found: number;
  readonly expected: number;
  readonly passed: boolean;
}

export function selfCheck(): SelfCheck[] {
  const [a, b, lambda] = [0.7, 1.9, 0.4];
  const here = condition(doubleIntegrator(), dualMetric({ kind: "constant", n: 2, W: [1, -a, -a, b] }));
  here.moveTo(Float64Array.of(0, 0));
  const rho = 2 * lambda * b + (b - 2 * lambda * a) ** 2 / (2 * a - 2 * lambda);
  return [
    check("contraction rate of a double integrator", here.rate().rate, a),
    check("its authority density", here.authorityDensity(lambda), rho / Math.sqrt(b - a * a)),
    check("Clopper-Pearson limit, 0 of 299 at 95 %", clopperPearsonUpper(0, 299, 0.95), 1 - 0.05 ** (1 / 299)),
  ];
}

function check(name: string, found: number, expected: number): SelfCheck {
  return { name, found, expected, passed: Math.abs(found - expected) <= 1e-9 * Math.abs(expected) };
}

function doubleIntegrator(): ControlAffineModel {
  const zero = newModelPoint(2, 1, 0);
  return {
    n: 2,
    m: 1,
    p: 0,
    active: [0, 1],
    rotation: null,
    embed: (active, z) => z.set(active),
    evaluate: (z, out) => {
      out.dBdx.set(zero.dBdx);
      out.f.set([z[1]!, 0]);
      out.B.set([0, 1]);
      out.dfdx.set([0, 1, 0, 0]);
    },
  };
}
