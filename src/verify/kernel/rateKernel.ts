/**
 * The pointwise contraction rate of a network metric for many states at once, float64 in SIMD WebAssembly
 * (assembly/rateKernel.ts), on given plant numbers:
 *   rate = -1/2 max over corners of eigmax(C, P^T W P),  C = P^T (-D(v) + A(v) W + W A(v)^T) P,
 *   W = w0 I + L L^T,  D(v) = d_f W + sum_j v_j d_{b_j} W.
 * A(v): n x n at each input corner (with the body-frame spin -psidot S where a rotation is declared), P: n x (n - m), an
 * orthonormal basis of null(B^T). Same rate as condition.ts, by other code.
 */
import type { Layer, Mlp } from "../../nets/mlp.js";
import { RATE_KERNEL } from "./rateKernelWasm.js";

export interface KernelMetric {
  readonly n: number;
  readonly m: number;
  readonly w0: number;
  readonly mlp: Mlp;
  /** Input corners, each m. */
  readonly corners: readonly Float64Array[];
}

export interface RateKernel {
  /** States it takes at once. */
  readonly capacity: number;
  /**
   * Sets state number `at`: network inputs s, their derivatives along f, b_1 .. b_m ((m + 1) x inputs), A at each corner
   * (corners x n x n), P.
   */
  set(at: number, s: Float64Array, tangents: Float64Array, A: Float64Array, P: Float64Array): void;
  /** Rates of the first `count` states, 1/s; NaN where P^T W P is not positive definite. A view: copy what is kept. */
  run(count: number): Float64Array;
}

interface Exports {
  readonly memory: { readonly buffer: ArrayBuffer };
  room(bytes: number): number;
  columnsOf(): number;
  setUp(
    n: number,
    m: number,
    corners: number,
    layers: number,
    w0: number,
    shapes: number,
    inputs: number,
    widest: number,
  ): void;
  rates(x: number, A: number, P: number, blocks: number, out: number): void;
}

/** The part of the standard WebAssembly interface (W3C, 2019) that is used; Node's types do not declare it. */
interface WebAssemblyApi {
  readonly Module: new (bytes: Uint8Array) => object;
  readonly Instance: new (module: object, imports: object) => { readonly exports: unknown };
}

/** States of a block: the lanes of two vectors. */
const LANES = 4;

/** Throws when the metric has no state that is not actuated: every rate is then possible. */
export function rateKernel(metric: KernelMetric, capacity: number): RateKernel {
  const { n, m, w0, mlp, corners } = metric;
  const k = n - m;
  if (k < 1) throw new Error(`the rate kernel needs fewer inputs than states; given ${m} inputs and ${n} states`);
  const { Module, Instance } = (globalThis as object as { WebAssembly: WebAssemblyApi }).WebAssembly;
  const kernel = new Instance(new Module(Buffer.from(RATE_KERNEL, "base64")), {}).exports as Exports;
  const inputs = mlp.layers[0]!.weights[0]!.length;
  const blocks = Math.ceil(capacity / LANES);
  const rows = (layer: Layer): number => layer.bias.length;

  const double = (count: number): number => kernel.room(8 * count);
  const layers = mlp.layers.map((layer) => ({
    layer,
    weights: double(rows(layer) * layer.weights[0]!.length),
    bias: double(rows(layer)),
  }));
  const shapes = kernel.room(16 * layers.length);
  const cornerInputs = double(corners.length * m);
  const widest = Math.max(...mlp.layers.map(rows));
  kernel.setUp(n, m, corners.length, layers.length, w0, shapes, cornerInputs, widest);
  const columns = kernel.columnsOf();
  const sizes = { x: inputs * columns * 2, A: corners.length * n * n * LANES, P: n * k * LANES };
  const places = { x: double(blocks * sizes.x), A: double(blocks * sizes.A), P: double(blocks * sizes.P) };
  const out = double(blocks * LANES);

  // memory grows no more from here on: views stay valid
  const numbers = new Float64Array(kernel.memory.buffer);
  const integers = new Int32Array(kernel.memory.buffer);
  layers.forEach(({ layer, weights, bias }, l) => {
    numbers.set(layer.weights.flat(), weights / 8);
    numbers.set(layer.bias, bias / 8);
    integers.set([rows(layer), layer.weights[0]!.length, weights, bias], shapes / 4 + 4 * l);
  });
  corners.forEach((corner, c) => {
    numbers.set(corner, cornerInputs / 8 + c * m);
  });
  const x = numbers.subarray(places.x / 8, places.x / 8 + blocks * sizes.x);
  const A = numbers.subarray(places.A / 8, places.A / 8 + blocks * sizes.A);
  const P = numbers.subarray(places.P / 8, places.P / 8 + blocks * sizes.P);
  const result = numbers.subarray(out / 8, out / 8 + blocks * LANES);

  return {
    capacity: blocks * LANES,
    set: (at, s, tangents, jacobians, basis) => {
      const block = Math.floor(at / LANES);
      const lane = at % LANES;
      const row = 2 * columns;
      for (let i = 0; i < inputs; i++) {
        const to = block * sizes.x + i * row + lane;
        x[to] = s[i]!;
        for (let d = 0; d <= m; d++) x[to + LANES * (d + 1)] = tangents[d * inputs + i]!;
      }
      for (let e = 0; e < jacobians.length; e++) A[block * sizes.A + e * LANES + lane] = jacobians[e]!;
      for (let e = 0; e < basis.length; e++) P[block * sizes.P + e * LANES + lane] = basis[e]!;
    },
    run: (count) => {
      kernel.rates(places.x, places.A, places.P, Math.ceil(count / LANES), out);
      return result.subarray(0, count);
    },
  };
}
