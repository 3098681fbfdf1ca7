// AssemblyScript, not TypeScript: the pointwise rate in SIMD float64, four states at a time. Built by data of
// scripts in package.json into rateKernel.wasm; the conventions are those of ../rateKernel.ts.
//
// A scalar of a block is four consecutive float64 (two v128), one a state. Matrices are row-major.

/** Bytes of one scalar of a block, and of half a block (one v128). */
const BLOCK: usize = 32;
const HALF: usize = 16;

let next: usize = __heap_base;

/** Room for so many bytes, 16-byte aligned, never given back. */
export function room(bytes: usize): usize {
  const at = (next + 15) & ~15;
  next = at + bytes;
  const pages = i32((next + 0xffff) >> 16);
  if (pages > memory.size()) memory.grow(pages - memory.size());
  return at;
}

/**
 * Y = W X: weights at w (rows x cols, plain float64), X at x (cols x columns v128), Y at y (rows x columns v128). `columns`
 * is a multiple of 4; bias (plain, rows) is added to the first two columns, the values.
 */
function layer(w: usize, bias: usize, rows: i32, cols: i32, x: usize, columns: i32, y: usize): void {
  const stride = (<usize>columns) << 4;
  for (let r: i32 = 0; r < rows; r += 2) {
    const two = r + 1 < rows;
    const w0 = w + (<usize>(r * cols) << 3);
    const w1 = two ? w0 + (<usize>cols << 3) : w0;
    for (let c: i32 = 0; c < columns; c += 4) {
      let a0 = f64x2.splat(0);
      let a1 = a0;
      let a2 = a0;
      let a3 = a0;
      let b0 = a0;
      let b1 = a0;
      let b2 = a0;
      let b3 = a0;
      if (c == 0) {
        a0 = a1 = v128.load64_splat(bias + (<usize>r << 3));
        b0 = b1 = v128.load64_splat(bias + (<usize>(two ? r + 1 : r) << 3));
      }
      let at = x + (<usize>c << 4);
      for (let k: usize = 0; k < <usize>cols; k++) {
        const x0 = v128.load(at);
        const x1 = v128.load(at, 16);
        const x2 = v128.load(at, 32);
        const x3 = v128.load(at, 48);
        const p = v128.load64_splat(w0 + (k << 3));
        const q = v128.load64_splat(w1 + (k << 3));
        a0 = f64x2.add(a0, f64x2.mul(p, x0));
        a1 = f64x2.add(a1, f64x2.mul(p, x1));
        a2 = f64x2.add(a2, f64x2.mul(p, x2));
        a3 = f64x2.add(a3, f64x2.mul(p, x3));
        b0 = f64x2.add(b0, f64x2.mul(q, x0));
        b1 = f64x2.add(b1, f64x2.mul(q, x1));
        b2 = f64x2.add(b2, f64x2.mul(q, x2));
        b3 = f64x2.add(b3, f64x2.mul(q, x3));
        at += stride;
      }
      const out = y + <usize>r * stride + (<usize>c << 4);
      v128.store(out, a0);
      v128.store(out, a1, 16);
      v128.store(out, a2, 32);
      v128.store(out, a3, 48);
      if (two) {
        v128.store(out + stride, b0);
        v128.store(out + stride, b1, 16);
        v128.store(out + stride, b2, 32);
        v128.store(out + stride, b3, 48);
      }
    }
  }
}

// @ts-ignore: decorator
@inline
function horner(p: v128, r: v128, c: f64): v128 {
  return f64x2.add(f64x2.mul(p, r), f64x2.splat(c));
}

/**
 * tanh(x) = e / (e + 2), e = expm1(2 |x|) = 2^k expm1(r) + (2^k - 1), r = 2 |x| - k ln 2 in two parts (Cody and Waite,
 * "Software Manual for the Elementary Functions", 1980, chapter 6), expm1(r) by its Taylor polynomial of degree 13 on
 * |r| <= ln(2) / 2. Beyond |x| = 20 it is 1 to the last bit.
 */
function tanh(x: v128): v128 {
  const sign = v128.and(x, f64x2.splat(-0.0));
  const twice = f64x2.min(f64x2.mul(f64x2.abs(x), f64x2.splat(2)), f64x2.splat(40));
  const magic = f64x2.splat(6755399441055744.0);
  const shifted = f64x2.add(f64x2.mul(twice, f64x2.splat(1.4426950408889634)), magic);
  const k = f64x2.sub(shifted, magic);
  const r = f64x2.sub(
    f64x2.sub(twice, f64x2.mul(k, f64x2.splat(6.93147180369123816490e-1))),
    f64x2.mul(k, f64x2.splat(1.90821492927058770002e-10)),
  );
  const scale = i64x2.shl(i64x2.add(shifted, i64x2.splat(1023)), 52);
  let p = f64x2.splat(1.0 / 6227020800.0);
  p = horner(p, r, 1.0 / 479001600.0);
  p = horner(p, r, 1.0 / 39916800.0);
  p = horner(p, r, 1.0 / 3628800.0);
  p = horner(p, r, 1.0 / 362880.0);
  p = horner(p, r, 1.0 / 40320.0);
  p = horner(p, r, 1.0 / 5040.0);
  p = horner(p, r, 1.0 / 720.0);
  p = horner(p, r, 1.0 / 120.0);
  p = horner(p, r, 1.0 / 24.0);
  p = horner(p, r, 1.0 / 6.0);
  p = horner(p, r, 0.5);
  // r + r^2 p: the leading term is kept exact
  const small = f64x2.add(r, f64x2.mul(f64x2.mul(r, r), p));
  const e = f64x2.add(f64x2.mul(scale, small), f64x2.sub(scale, f64x2.splat(1)));
  return v128.or(f64x2.div(e, f64x2.add(e, f64x2.splat(2))), sign);
}

/** tanh of the values (first two columns), their slope times the other columns. */
function activate(y: usize, rows: i32, columns: i32): void {
  const stride = (<usize>columns) << 4;
  for (let r: i32 = 0; r < rows; r++) {
    const at = y + <usize>r * stride;
    const h0 = tanh(v128.load(at));
    const h1 = tanh(v128.load(at, 16));
    v128.store(at, h0);
    v128.store(at, h1, 16);
    const s0 = f64x2.sub(f64x2.splat(1), f64x2.mul(h0, h0));
    const s1 = f64x2.sub(f64x2.splat(1), f64x2.mul(h1, h1));
    for (let c: usize = 2; c < <usize>columns; c += 2) {
      const t = at + (c << 4);
      v128.store(t, f64x2.mul(s0, v128.load(t)));
      v128.store(t, f64x2.mul(s1, v128.load(t, 16)), 16);
    }
  }
}

/** Largest eigenvalue of the symmetric k x k matrices at a (stride HALF), by cyclic Jacobi rotations, both lanes at once. */
function largestEigenvalue(a: usize, k: i32): v128 {
  const tiny = f64x2.splat(1e-300);
  const one = f64x2.splat(1);
  for (let sweep: i32 = 0; sweep < 12; sweep++) {
    let off = f64x2.splat(0);
    let all = f64x2.splat(0);
    for (let i: i32 = 0; i < k; i++) {
      for (let j: i32 = 0; j <= i; j++) {
        const v = v128.load(a + <usize>(i * k + j) * HALF);
        const square = f64x2.mul(v, v);
        if (i == j) all = f64x2.add(all, square);
        else off = f64x2.add(off, square);
      }
    }
    // the eigenvalues are off by at most the square of what is left over their distance, and never by more than it
    const isDone = f64x2.le(off, f64x2.mul(all, f64x2.splat(1e-31)));
    if (i64x2.all_true(isDone)) break;
    for (let p: i32 = 0; p < k - 1; p++) {
      for (let q: i32 = p + 1; q < k; q++) {
        const pp = a + <usize>(p * k + p) * HALF;
        const qq = a + <usize>(q * k + q) * HALF;
        const qp = a + <usize>(q * k + p) * HALF;
        const apq = v128.load(qp);
        const app = v128.load(pp);
        const aqq = v128.load(qq);
        // t = sign(theta) / (|theta| + sqrt(theta^2 + 1)) with theta = (aqq - app) / (2 apq), free of division by zero
        const difference = f64x2.sub(aqq, app);
        const double = f64x2.add(apq, apq);
        const root = f64x2.sqrt(f64x2.add(f64x2.mul(difference, difference), f64x2.mul(double, double)));
        const denominator = f64x2.add(f64x2.add(f64x2.abs(difference), root), tiny);
        const sign = v128.and(difference, f64x2.splat(-0.0));
        const t = f64x2.div(v128.xor(double, sign), denominator);
        const c = f64x2.div(one, f64x2.sqrt(f64x2.add(f64x2.mul(t, t), one)));
        const s = f64x2.mul(t, c);
        const change = f64x2.mul(t, apq);
        v128.store(pp, f64x2.sub(app, change));
        v128.store(qq, f64x2.add(aqq, change));
        v128.store(qp, f64x2.splat(0));
        for (let r: i32 = 0; r < k; r++) {
          if (r == p || r == q) continue;
          const rp = a + <usize>(r > p ? r * k + p : p * k + r) * HALF;
          const rq = a + <usize>(r > q ? r * k + q : q * k + r) * HALF;
          const x = v128.load(rp);
          const y = v128.load(rq);
          v128.store(rp, f64x2.sub(f64x2.mul(c, x), f64x2.mul(s, y)));
          v128.store(rq, f64x2.add(f64x2.mul(s, x), f64x2.mul(c, y)));
        }
      }
    }
  }
  let top = v128.load(a);
  for (let i: i32 = 1; i < k; i++) top = f64x2.max(top, v128.load(a + <usize>(i * k + i) * HALF));
  return top;
}

/** Sizes and places of one certificate, set once. */
let n: i32 = 0;
let m: i32 = 0;
let k: i32 = 0;
let corners: i32 = 0;
let layers: i32 = 0;
let w0: f64 = 0;
/** Per layer: rows, cols, place of weights, place of bias, as four i32. */
let shape: usize = 0;
/** corners x m, plain float64. */
let inputs: usize = 0;
let ping: usize = 0;
let pong: usize = 0;
let work: usize = 0;

export function setUp(
  states: i32,
  controls: i32,
  cornerCount: i32,
  layerCount: i32,
  leastEigenvalue: f64,
  shapes: usize,
  cornerInputs: usize,
  widest: i32,
): void {
  n = states;
  m = controls;
  k = states - controls;
  corners = cornerCount;
  layers = layerCount;
  w0 = leastEigenvalue;
  shape = shapes;
  inputs = cornerInputs;
  const columns = columnsOf();
  ping = room(<usize>(widest * columns) << 4);
  pong = room(<usize>(widest * columns) << 4);
  work = room(<usize>((m + 3) * n * n + 6 * n * n + 64) << 4);
}

/** v128 columns of the network's values and m + 1 tangents, filled up to a multiple of 4. */
export function columnsOf(): i32 {
  return (2 * (m + 2) + 3) & ~3;
}

/**
 * Rates of `blocks` blocks of four states. x: network inputs and tangents, blocks x (inputs x columns v128); A: blocks x
 * corners x (n x n scalars); P: blocks x (n x k scalars); out: 4 float64 a block, -1/2 of the largest eigenvalue; NaN where
 * P^T W P is not positive definite.
 */
export function rates(x: usize, A: usize, P: usize, blocks: i32, out: usize): void {
  const columns = columnsOf();
  const inputRows = load<i32>(shape, 4);
  const bytesX = <usize>(inputRows * columns) << 4;
  const bytesA = <usize>(corners * n * n) * BLOCK;
  const bytesP = <usize>(n * k) * BLOCK;
  for (let b: i32 = 0; b < blocks; b++) {
    let from = x + <usize>b * bytesX;
    for (let l: i32 = 0; l < layers; l++) {
      const at = shape + (<usize>l << 4);
      const rows = load<i32>(at);
      const to = (l & 1) == 0 ? ping : pong;
      layer(load<i32>(at, 8), load<i32>(at, 12), rows, load<i32>(at, 4), from, columns, to);
      if (l < layers - 1) activate(to, rows, columns);
      from = to;
    }
    for (let half: usize = 0; half < BLOCK; half += HALF) {
      const rate = halfRate(
        from + half,
        (<usize>columns) << 4,
        A + <usize>b * bytesA + half,
        P + <usize>b * bytesP + half,
      );
      v128.store(out + <usize>b * BLOCK + half, rate);
    }
  }
}

/** The rate of half a block. y: packed rows of L (stride `rowBytes`), then its tangents, one v128 pair further each. */
function halfRate(y: usize, rowBytes: usize, A: usize, P: usize): v128 {
  const nn = <usize>(n * n) * HALF;
  const W = work;
  const G = W + nn;
  const WG = G + nn;
  const T = WG + nn;
  const S = T + nn;
  const Y = S + nn;
  const tangents = Y + nn;

  // W = w0 I + L L^T, and Wp = P^T W P = S S^T, G = P S^-T
  for (let i: i32 = 0; i < n; i++) {
    for (let j: i32 = 0; j <= i; j++) {
      const v = product(y, y, rowBytes, i, j);
      const w = i == j ? f64x2.add(v, f64x2.splat(w0)) : v;
      v128.store(W + <usize>(i * n + j) * HALF, w);
      v128.store(W + <usize>(j * n + i) * HALF, w);
    }
  }
  multiply(W, HALF, P, BLOCK, T, n, n, k);
  for (let i: i32 = 0; i < k; i++) {
    for (let j: i32 = 0; j <= i; j++) {
      let sum = dotColumns(P, BLOCK, i, T, HALF, j);
      for (let l: i32 = 0; l < j; l++) {
        const a = v128.load(S + <usize>(i * k + l) * HALF);
        sum = f64x2.sub(sum, f64x2.mul(a, v128.load(S + <usize>(j * k + l) * HALF)));
      }
      const pivot = i == j ? f64x2.sqrt(sum) : f64x2.div(sum, v128.load(S + <usize>(j * k + j) * HALF));
      v128.store(S + <usize>(i * k + j) * HALF, pivot);
    }
  }
  for (let r: i32 = 0; r < n; r++) {
    for (let j: i32 = 0; j < k; j++) {
      let sum = v128.load(P + <usize>(r * k + j) * BLOCK);
      for (let l: i32 = 0; l < j; l++) {
        const g = v128.load(G + <usize>(r * k + l) * HALF);
        sum = f64x2.sub(sum, f64x2.mul(g, v128.load(S + <usize>(j * k + l) * HALF)));
      }
      v128.store(G + <usize>(r * k + j) * HALF, f64x2.div(sum, v128.load(S + <usize>(j * k + j) * HALF)));
    }
  }
  multiply(W, HALF, G, HALF, WG, n, n, k);

  // G^T D_v G for the tangents D_v = dL_v L^T + L dL_v^T
  for (let v: i32 = 0; v <= m; v++) {
    const dy = y + (<usize>(v + 1) << 5);
    for (let i: i32 = 0; i < n; i++) {
      for (let j: i32 = 0; j <= i; j++) {
        const d = f64x2.add(product(dy, y, rowBytes, i, j), product(y, dy, rowBytes, i, j));
        v128.store(S + <usize>(i * n + j) * HALF, d);
        v128.store(S + <usize>(j * n + i) * HALF, d);
      }
    }
    multiply(S, HALF, G, HALF, T, n, n, k);
    const D = tangents + <usize>v * nn;
    for (let i: i32 = 0; i < k; i++) {
      for (let j: i32 = 0; j <= i; j++) v128.store(D + <usize>(i * k + j) * HALF, dotColumns(G, HALF, i, T, HALF, j));
    }
  }

  let worst = f64x2.splat(-Infinity);
  for (let c: i32 = 0; c < corners; c++) {
    multiply(A + <usize>(c * n * n) * BLOCK, BLOCK, WG, HALF, T, n, n, k);
    for (let i: i32 = 0; i < k; i++) {
      for (let j: i32 = 0; j <= i; j++) {
        const at = <usize>(i * k + j) * HALF;
        let sum = f64x2.add(dotColumns(G, HALF, i, T, HALF, j), dotColumns(G, HALF, j, T, HALF, i));
        sum = f64x2.sub(sum, v128.load(tangents + at));
        for (let v: i32 = 0; v < m; v++) {
          const u = v128.load64_splat(inputs + (<usize>(c * m + v) << 3));
          sum = f64x2.sub(sum, f64x2.mul(u, v128.load(tangents + <usize>(v + 1) * nn + at)));
        }
        v128.store(Y + at, sum);
      }
    }
    worst = f64x2.max(worst, largestEigenvalue(Y, k));
  }
  return f64x2.mul(worst, f64x2.splat(-0.5));
}

/** Row i of one packed lower-triangular matrix times row j of another. */
function product(a: usize, b: usize, rowBytes: usize, i: i32, j: i32): v128 {
  let sum = f64x2.splat(0);
  let at = a + <usize>((i * (i + 1)) >> 1) * rowBytes;
  let bt = b + <usize>((j * (j + 1)) >> 1) * rowBytes;
  const last = i < j ? i : j;
  for (let l: i32 = 0; l <= last; l++) {
    sum = f64x2.add(sum, f64x2.mul(v128.load(at), v128.load(bt)));
    at += rowBytes;
    bt += rowBytes;
  }
  return sum;
}

/** C (rows x columns) = A (rows x inner) B (inner x columns); strides of A and B are given, that of C is HALF. */
function multiply(a: usize, sa: usize, b: usize, sb: usize, c: usize, rows: i32, inner: i32, columns: i32): void {
  for (let i: i32 = 0; i < rows; i++) {
    for (let j: i32 = 0; j < columns; j += 2) {
      const two = j + 1 < columns;
      let x = f64x2.splat(0);
      let y = x;
      let at = a + <usize>(i * inner) * sa;
      let bt = b + <usize>j * sb;
      const step = <usize>columns * sb;
      for (let l: i32 = 0; l < inner; l++) {
        const v = v128.load(at);
        x = f64x2.add(x, f64x2.mul(v, v128.load(bt)));
        if (two) y = f64x2.add(y, f64x2.mul(v, v128.load(bt + sb)));
        at += sa;
        bt += step;
      }
      v128.store(c + <usize>(i * columns + j) * HALF, x);
      if (two) v128.store(c + <usize>(i * columns + j + 1) * HALF, y);
    }
  }
}

/** Column i of X (n x k) times column j of Y (n x k). */
function dotColumns(x: usize, sx: usize, i: i32, y: usize, sy: usize, j: i32): v128 {
  let sum = f64x2.splat(0);
  let at = x + <usize>i * sx;
  let bt = y + <usize>j * sy;
  for (let r: i32 = 0; r < n; r++) {
    sum = f64x2.add(sum, f64x2.mul(v128.load(at), v128.load(bt)));
    at += <usize>k * sx;
    bt += <usize>k * sy;
  }
  return sum;
}
