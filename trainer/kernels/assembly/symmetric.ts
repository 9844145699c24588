/**
 * Eigenvalues and vectors of a small symmetric matrix: Householder reduction and implicit QL (Wilkinson & Reinsch 1971,
 * contributions II/2 and II/4). Vectors are rows, so that reflections and rotations run along contiguous numbers. Pointers
 * are byte offsets, sizes are counted in elements.
 */

const MOST_STEPS: i32 = 60;
const EPSILON: f64 = 2.220446049250313e-16;

/**
 * z (n × n) symmetric, its lower triangle read, becomes eigenvectors as rows; d (n) the values in no order; work of n (n + 4)
 * numbers. 0, or 1 where a value does not settle.
 */
export function diagonalise64(z: usize, d: usize, work: usize, n: i32): i32 {
  const e = work;
  const turns = e + (<usize>n << 3);
  const halves = turns + (<usize>n << 4);
  const kept = halves + (<usize>n << 3);
  tridiagonalise(z, n, halves, e);
  for (let i = 0; i < n; i++) f64.store(d + (<usize>i << 3), f64.load(z + (<usize>(i * n + i) << 3)));
  memory.copy(kept, z, <usize>(n * n) << 3);
  accumulate(z, kept, n, halves);
  return implicitQl(z, n, d, e, turns);
}

function tridiagonalise(z: usize, n: i32, halves: usize, e: usize): void {
  for (let i = n - 1; i > 0; i--) {
    const row = z + (<usize>(i * n) << 3);
    const at = <usize>i << 3;
    let scale: f64 = 0;
    for (let k: usize = 0; k < at; k += 8) scale += abs(f64.load(row + k));
    if (i == 1 || scale == 0) {
      f64.store(e + at, f64.load(row + at - 8));
      f64.store(halves + at, 0);
      continue;
    }
    let h: f64 = 0;
    for (let k: usize = 0; k < at; k += 8) {
      const u = f64.load(row + k) / scale;
      f64.store(row + k, u);
      h += u * u;
    }
    const f = f64.load(row + at - 8);
    const g = f >= 0 ? -sqrt(h) : sqrt(h);
    f64.store(e + at, scale * g);
    h -= f * g;
    f64.store(row + at - 8, f - g);
    reflect(z, n, i, h, e);
    f64.store(halves + at, h);
  }
  f64.store(halves, 0);
  f64.store(e, 0);
}

/** Both sides of the leading i × i block reflected by the vector in row i; e before i is scratch. */
function reflect(z: usize, n: i32, i: i32, h: f64, e: usize): void {
  const stride = <usize>n << 3;
  const row = z + <usize>i * stride;
  memory.fill(e, 0, <usize>i << 3);
  for (let j = 0, at = z; j < i; j++, at += stride) {
    const u = f64.load(row + (<usize>j << 3));
    const factor = f64x2.splat(u);
    let s = f64x2.splat(0);
    let k = 0;
    let b: usize = 0;
    for (; k + 1 < j; k += 2, b += 16) {
      const x = v128.load(at + b);
      s = f64x2.add(s, f64x2.mul(x, v128.load(row + b)));
      v128.store(e + b, f64x2.add(v128.load(e + b), f64x2.mul(x, factor)));
    }
    let sum = f64x2.extract_lane(s, 0) + f64x2.extract_lane(s, 1);
    if (k < j) {
      const x = f64.load(at + b);
      sum += x * f64.load(row + b);
      f64.store(e + b, f64.load(e + b) + x * u);
    }
    const own = <usize>j << 3;
    f64.store(e + own, f64.load(e + own) + (sum + f64.load(at + own) * u));
  }
  let f: f64 = 0;
  const end = <usize>i << 3;
  for (let k: usize = 0; k < end; k += 8) {
    const v = f64.load(e + k) / h;
    f64.store(e + k, v);
    f += v * f64.load(row + k);
  }
  const half = f / (h + h);
  for (let k: usize = 0; k < end; k += 8) f64.store(e + k, f64.load(e + k) - half * f64.load(row + k));
  for (let j = 0, at = z; j < i; j++, at += stride) {
    const u = f64.load(row + (<usize>j << 3));
    const v = f64.load(e + (<usize>j << 3));
    takeTwo(at, u, e, v, row, j + 1);
  }
}

/** x −= u a + v b. */
function takeTwo(x: usize, u: f64, a: usize, v: f64, b: usize, n: i32): void {
  const left = f64x2.splat(u);
  const right = f64x2.splat(v);
  let k = 0;
  let at: usize = 0;
  for (; k + 1 < n; k += 2, at += 16) {
    const taken = f64x2.add(f64x2.mul(left, v128.load(a + at)), f64x2.mul(right, v128.load(b + at)));
    v128.store(x + at, f64x2.sub(v128.load(x + at), taken));
  }
  if (k < n) f64.store(x + at, f64.load(x + at) - (u * f64.load(a + at) + v * f64.load(b + at)));
}

/** The product of the reflections, transposed into rows. */
function accumulate(z: usize, kept: usize, n: i32, halves: usize): void {
  const stride = <usize>n << 3;
  memory.fill(z, 0, <usize>(n * n) << 3);
  for (let i = 0; i < n; i++) f64.store(z + (<usize>(i * n + i) << 3), 1);
  for (let i = 1; i < n; i++) {
    const h = f64.load(halves + (<usize>i << 3));
    if (h == 0) continue;
    const u = kept + <usize>i * stride;
    for (let j = 0, at = z; j < i; j++, at += stride) reflectRow(at, u, h, i);
  }
}

function reflectRow(x: usize, u: usize, h: f64, n: i32): void {
  let s0 = f64x2.splat(0);
  let s1 = f64x2.splat(0);
  let k = 0;
  let at: usize = 0;
  for (; k + 3 < n; k += 4, at += 32) {
    s0 = f64x2.add(s0, f64x2.mul(v128.load(x + at), v128.load(u + at)));
    s1 = f64x2.add(s1, f64x2.mul(v128.load(x + at, 16), v128.load(u + at, 16)));
  }
  const s = f64x2.add(s0, s1);
  let sum = f64x2.extract_lane(s, 0) + f64x2.extract_lane(s, 1);
  for (; k < n; k++, at += 8) sum += f64.load(x + at) * f64.load(u + at);
  const g = sum / h;
  const factor = f64x2.splat(g);
  k = 0;
  at = 0;
  for (; k + 1 < n; k += 2, at += 16)
    v128.store(x + at, f64x2.sub(v128.load(x + at), f64x2.mul(factor, v128.load(u + at))));
  if (k < n) f64.store(x + at, f64.load(x + at) - g * f64.load(u + at));
}

function implicitQl(z: usize, n: i32, d: usize, e: usize, turns: usize): i32 {
  for (let i = 1; i < n; i++) f64.store(e + (<usize>(i - 1) << 3), f64.load(e + (<usize>i << 3)));
  f64.store(e + (<usize>(n - 1) << 3), 0);
  for (let l = 0; l < n; l++) {
    for (let step = 0; ; step++) {
      let m = l;
      for (; m < n - 1; m++) {
        const at = d + (<usize>m << 3);
        const size = abs(f64.load(at)) + abs(f64.load(at, 8));
        if (abs(f64.load(e + (<usize>m << 3))) <= EPSILON * size) break;
      }
      if (m == l) break;
      if (step == MOST_STEPS) return 1;
      turnRows(z, n, sweep(d, e, l, m, turns), m, turns);
    }
  }
  return 0;
}

/** One implicit QL step on rows l … m; turns hold cosine and sine of rows i and i + 1, the last such i is given back. */
function sweep(d: usize, e: usize, l: i32, m: i32, turns: usize): i32 {
  const dl = d + (<usize>l << 3);
  const el = e + (<usize>l << 3);
  const dm = d + (<usize>m << 3);
  const em = e + (<usize>m << 3);
  let g = (f64.load(dl, 8) - f64.load(dl)) / (2 * f64.load(el));
  let r = sqrt(g * g + 1);
  g = f64.load(dm) - f64.load(dl) + f64.load(el) / (g + (g >= 0 ? r : -r));
  let s: f64 = 1;
  let c: f64 = 1;
  let p: f64 = 0;
  for (let i = m - 1; i >= l; i--) {
    const at = <usize>i << 3;
    const f = s * f64.load(e + at);
    const b = c * f64.load(e + at);
    r = sqrt(f * f + g * g);
    f64.store(e + at, r, 8);
    if (r == 0) {
      f64.store(d + at, f64.load(d + at, 8) - p, 8);
      f64.store(em, 0);
      return i + 1;
    }
    s = f / r;
    c = g / r;
    g = f64.load(d + at, 8) - p;
    r = (f64.load(d + at) - g) * s + 2 * c * b;
    p = s * r;
    f64.store(d + at, g + p, 8);
    g = c * r - b;
    f64.store(turns + 2 * at, c);
    f64.store(turns + 2 * at, s, 8);
  }
  f64.store(dl, f64.load(dl) - p);
  f64.store(el, g);
  f64.store(em, 0);
  return l;
}

/** Rows m … l turned into each other, pair by pair: four columns at a time, each number read and written once. */
function turnRows(z: usize, n: i32, l: i32, m: i32, turns: usize): void {
  const stride = <usize>n << 3;
  const bottom = z + <usize>m * stride;
  let k = 0;
  for (; k + 3 < n; k += 4) {
    let at = bottom + (<usize>k << 3);
    let a = v128.load(at);
    let b = v128.load(at, 16);
    for (let i = m - 1; i >= l; i--, at -= stride) {
      const cos = v128.load_splat<f64>(turns + (<usize>i << 4));
      const sin = v128.load_splat<f64>(turns + (<usize>i << 4), 8);
      const p = v128.load(at - stride);
      const q = v128.load(at - stride, 16);
      v128.store(at, f64x2.add(f64x2.mul(sin, p), f64x2.mul(cos, a)));
      v128.store(at, f64x2.add(f64x2.mul(sin, q), f64x2.mul(cos, b)), 16);
      a = f64x2.sub(f64x2.mul(cos, p), f64x2.mul(sin, a));
      b = f64x2.sub(f64x2.mul(cos, q), f64x2.mul(sin, b));
    }
    v128.store(at, a);
    v128.store(at, b, 16);
  }
  for (; k < n; k++) {
    let at = bottom + (<usize>k << 3);
    let a = f64.load(at);
    for (let i = m - 1; i >= l; i--, at -= stride) {
      const cos = f64.load(turns + (<usize>i << 4));
      const sin = f64.load(turns + (<usize>i << 4), 8);
      const p = f64.load(at - stride);
      f64.store(at, sin * p + cos * a);
      a = cos * p - sin * a;
    }
    f64.store(at, a);
  }
}
