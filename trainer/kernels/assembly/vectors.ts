/** Sums and products along vectors. Pointers are byte offsets, sizes are counted in elements. */

/** Σ a b in eight lanes, folded pairwise; the last products, fewer than eight, are added in order. */
export function dot64(a: usize, b: usize, n: i32): f64 {
  let s0 = f64x2.splat(0);
  let s1 = f64x2.splat(0);
  let s2 = f64x2.splat(0);
  let s3 = f64x2.splat(0);
  let k = 0;
  for (; k + 7 < n; k += 8, a += 64, b += 64) {
    s0 = f64x2.add(s0, f64x2.mul(v128.load(a), v128.load(b)));
    s1 = f64x2.add(s1, f64x2.mul(v128.load(a, 16), v128.load(b, 16)));
    s2 = f64x2.add(s2, f64x2.mul(v128.load(a, 32), v128.load(b, 32)));
    s3 = f64x2.add(s3, f64x2.mul(v128.load(a, 48), v128.load(b, 48)));
  }
  const s = f64x2.add(f64x2.add(s0, s1), f64x2.add(s2, s3));
  let sum = f64x2.extract_lane(s, 0) + f64x2.extract_lane(s, 1);
  for (; k < n; k++, a += 8, b += 8) sum += f64.load(a) * f64.load(b);
  return sum;
}

/** y += f x. */
export function axpy64(y: usize, f: f64, x: usize, n: i32): void {
  const factor = f64x2.splat(f);
  let k = 0;
  for (; k + 3 < n; k += 4, y += 32, x += 32) {
    v128.store(y, f64x2.add(v128.load(y), f64x2.mul(factor, v128.load(x))));
    v128.store(y, f64x2.add(v128.load(y, 16), f64x2.mul(factor, v128.load(x, 16))), 16);
  }
  for (; k < n; k++, y += 8, x += 8) f64.store(y, f64.load(y) + f * f64.load(x));
}

/** x *= f. */
export function scale64(x: usize, f: f64, n: i32): void {
  const factor = f64x2.splat(f);
  let k = 0;
  for (; k + 1 < n; k += 2, x += 16) v128.store(x, f64x2.mul(v128.load(x), factor));
  if (k < n) f64.store(x, f64.load(x) * f);
}

/** c += conj(a) b on spectra kept as real and imaginary parts. */
export function spectraAdd64(
  cr: usize,
  ci: usize,
  ar: usize,
  ai: usize,
  br: usize,
  bi: usize,
  n: i32,
): void {
  let k = 0;
  let at: usize = 0;
  for (; k + 1 < n; k += 2, at += 16) {
    const xr = v128.load(ar + at);
    const xi = v128.load(ai + at);
    const yr = v128.load(br + at);
    const yi = v128.load(bi + at);
    const re = f64x2.add(f64x2.mul(xr, yr), f64x2.mul(xi, yi));
    const im = f64x2.sub(f64x2.mul(xr, yi), f64x2.mul(xi, yr));
    v128.store(cr + at, f64x2.add(v128.load(cr + at), re));
    v128.store(ci + at, f64x2.add(v128.load(ci + at), im));
  }
  if (k < n) {
    const xr = f64.load(ar + at);
    const xi = f64.load(ai + at);
    const yr = f64.load(br + at);
    const yi = f64.load(bi + at);
    f64.store(cr + at, f64.load(cr + at) + (xr * yr + xi * yi));
    f64.store(ci + at, f64.load(ci + at) + (xr * yi - xi * yr));
  }
}

/**
 * x = f cos(x) on float32, in place; the arithmetic is told in trainer/kernels/cosines.ts. A block's angles, then its sines:
 * in one loop there would be more constants than registers, which costs a third.
 */
export function cosines32(x: usize, f: f32, n: i32): void {
  const end = x + (<usize>(n & ~3) << 2);
  for (; x < end; x += 1024) {
    const last = end - x < 1024 ? end : x + 1024;
    for (let at = x; at < last; at += 16) v128.store(at, angles(v128.load(at)));
    for (let at = x; at < last; at += 16) v128.store(at, sines(v128.load(at), f));
  }
  const left = n & 3;
  if (left == 0) return;
  x = end;
  let rest = v128.load32_zero(x);
  if (left > 1) rest = v128.load_lane<f32>(x + 4, rest, 1);
  if (left > 2) rest = v128.load_lane<f32>(x + 8, rest, 2);
  rest = sines(angles(rest), f);
  v128.store_lane<f32>(x, rest, 0);
  if (left > 1) v128.store_lane<f32>(x + 4, rest, 1);
  if (left > 2) v128.store_lane<f32>(x + 8, rest, 2);
}

/** The angles in [-π/2, π/2] whose sines are the cosines of x: π/2 - |x less whole turns|. */
function angles(x: v128): v128 {
  const low = part(f64x2.promote_low_f32x4(x));
  const high = part(f64x2.promote_low_f32x4(v128.shuffle<f64>(x, x, 1, 1)));
  return v128.shuffle<f64>(f32x4.demote_f64x2_zero(low), f32x4.demote_f64x2_zero(high), 0, 2);
}

function part(x: v128): v128 {
  const t = f64x2.mul(x, f64x2.splat(TURNS));
  const magic = f64x2.splat(ROUNDING);
  const rest = f64x2.sub(t, f64x2.sub(f64x2.add(t, magic), magic));
  return f64x2.mul(f64x2.sub(f64x2.splat(0.25), f64x2.abs(rest)), f64x2.splat(TWO_PI));
}

/** f times the sines. */
function sines(r: v128, f: f32): v128 {
  const u = f32x4.mul(r, r);
  let p = f32x4.splat(SINE_9);
  p = f32x4.add(f32x4.mul(p, u), f32x4.splat(SINE_7));
  p = f32x4.add(f32x4.mul(p, u), f32x4.splat(SINE_5));
  p = f32x4.add(f32x4.mul(p, u), f32x4.splat(SINE_3));
  return f32x4.mul(f32x4.add(r, f32x4.mul(r, f32x4.mul(u, p))), f32x4.splat(f));
}

const TURNS: f64 = 0.15915494309189535;
const TWO_PI: f64 = 6.283185307179586;
const ROUNDING: f64 = 6755399441055744;
const SINE_3: f32 = -0.16666656732559204;
const SINE_5: f32 = 0.008333017118275166;
const SINE_7: f32 = -0.00019806614727713168;
const SINE_9: f32 = 2.6000548132287804e-6;

/**
 * c += A'x, or -=, over `steps` rows of A (m columns): each sum in the order of the rows, then added once. Long rows are read
 * in runs of 2048 columns, their sums kept at `sums` meanwhile.
 */
export function columnSums(
  c: usize,
  a: usize,
  stride: i32,
  x: usize,
  m: i32,
  steps: i32,
  isTaken: i32,
  sums: usize,
): void {
  const next = (<usize>stride) << 3;
  let j = 0;
  for (; m - j >= RUN; j += RUN, c += RUN << 3, a += RUN << 3) runSums(c, a, next, x, steps, isTaken, sums);
  for (; j + 7 < m; j += 8, c += 64, a += 64) eightSums(c, a, next, x, steps, isTaken);
  for (; j < m; j++, c += 8, a += 8) {
    let sum: f64 = 0;
    let from = a;
    for (let t: usize = 0; t < <usize>steps; t++, from += next) sum += f64.load(from) * f64.load(x + (t << 3));
    f64.store(c, f64.load(c) + (isTaken ? -sum : sum));
  }
}

const RUN: i32 = 2048;

function runSums(c: usize, a: usize, next: usize, x: usize, steps: i32, isTaken: i32, sums: usize): void {
  const end = sums + (RUN << 3);
  for (let at = sums; at < end; at += 16) v128.store(at, f64x2.splat(0));
  let t = 0;
  for (; t + 3 < steps; t += 4, x += 32, a += next << 2) fourRows(a, next, x, sums, end);
  for (; t < steps; t++, x += 8, a += next) {
    const f = v128.load_splat<f64>(x);
    for (let at = sums, from = a; at < end; at += 16, from += 16) {
      v128.store(at, f64x2.add(v128.load(at), f64x2.mul(v128.load(from), f)));
    }
  }
  for (let at = sums; at < end; at += 16, c += 16) {
    const sum = v128.load(at);
    v128.store(c, isTaken ? f64x2.sub(v128.load(c), sum) : f64x2.add(v128.load(c), sum));
  }
}

function fourRows(a: usize, next: usize, x: usize, sums: usize, end: usize): void {
  const f0 = v128.load_splat<f64>(x);
  const f1 = v128.load_splat<f64>(x, 8);
  const f2 = v128.load_splat<f64>(x, 16);
  const f3 = v128.load_splat<f64>(x, 24);
  const b = a + next;
  const c = b + next;
  const d = c + next;
  for (let at: usize = 0; at < end - sums; at += 16) {
    let sum = v128.load(sums + at);
    sum = f64x2.add(sum, f64x2.mul(v128.load(a + at), f0));
    sum = f64x2.add(sum, f64x2.mul(v128.load(b + at), f1));
    sum = f64x2.add(sum, f64x2.mul(v128.load(c + at), f2));
    sum = f64x2.add(sum, f64x2.mul(v128.load(d + at), f3));
    v128.store(sums + at, sum);
  }
}

function eightSums(c: usize, a: usize, next: usize, x: usize, steps: i32, isTaken: i32): void {
  let s0 = f64x2.splat(0);
  let s1 = f64x2.splat(0);
  let s2 = f64x2.splat(0);
  let s3 = f64x2.splat(0);
  for (const end = x + (<usize>steps << 3); x < end; x += 8, a += next) {
    const f = v128.load_splat<f64>(x);
    s0 = f64x2.add(s0, f64x2.mul(v128.load(a), f));
    s1 = f64x2.add(s1, f64x2.mul(v128.load(a, 16), f));
    s2 = f64x2.add(s2, f64x2.mul(v128.load(a, 32), f));
    s3 = f64x2.add(s3, f64x2.mul(v128.load(a, 48), f));
  }
  if (isTaken) {
    s0 = f64x2.neg(s0);
    s1 = f64x2.neg(s1);
    s2 = f64x2.neg(s2);
    s3 = f64x2.neg(s3);
  }
  v128.store(c, f64x2.add(v128.load(c), s0));
  v128.store(c, f64x2.add(v128.load(c, 16), s1), 16);
  v128.store(c, f64x2.add(v128.load(c, 32), s2), 32);
  v128.store(c, f64x2.add(v128.load(c, 48), s3), 48);
}

/** c += A x, or -=, over `rows` rows of A (m columns): each sum as `dot64` has it, then added once. */
export function rowDots(
  c: usize,
  cStride: i32,
  a: usize,
  stride: i32,
  x: usize,
  rows: i32,
  m: i32,
  isTaken: i32,
): void {
  const next = (<usize>stride) << 3;
  const further = (<usize>cStride) << 3;
  let i = 0;
  for (; i + 1 < rows; i += 2, a += 2 * next, c += 2 * further) {
    const sums = twoDots(a, a + next, x, m);
    const low = f64x2.extract_lane(sums, 0);
    const high = f64x2.extract_lane(sums, 1);
    f64.store(c, f64.load(c) + (isTaken ? -low : low));
    f64.store(c + further, f64.load(c + further) + (isTaken ? -high : high));
  }
  if (i == rows) return;
  const sum = dot64(a, x, m);
  f64.store(c, f64.load(c) + (isTaken ? -sum : sum));
}

/** Σ a x and Σ b x, each as `dot64` has it. */
function twoDots(a: usize, b: usize, x: usize, n: i32): v128 {
  let s0 = f64x2.splat(0);
  let s1 = f64x2.splat(0);
  let s2 = f64x2.splat(0);
  let s3 = f64x2.splat(0);
  let t0 = f64x2.splat(0);
  let t1 = f64x2.splat(0);
  let t2 = f64x2.splat(0);
  let t3 = f64x2.splat(0);
  let k = 0;
  for (; k + 7 < n; k += 8, a += 64, b += 64, x += 64) {
    const x0 = v128.load(x);
    s0 = f64x2.add(s0, f64x2.mul(v128.load(a), x0));
    t0 = f64x2.add(t0, f64x2.mul(v128.load(b), x0));
    const x1 = v128.load(x, 16);
    s1 = f64x2.add(s1, f64x2.mul(v128.load(a, 16), x1));
    t1 = f64x2.add(t1, f64x2.mul(v128.load(b, 16), x1));
    const x2 = v128.load(x, 32);
    s2 = f64x2.add(s2, f64x2.mul(v128.load(a, 32), x2));
    t2 = f64x2.add(t2, f64x2.mul(v128.load(b, 32), x2));
    const x3 = v128.load(x, 48);
    s3 = f64x2.add(s3, f64x2.mul(v128.load(a, 48), x3));
    t3 = f64x2.add(t3, f64x2.mul(v128.load(b, 48), x3));
  }
  const s = f64x2.add(f64x2.add(s0, s1), f64x2.add(s2, s3));
  const t = f64x2.add(f64x2.add(t0, t1), f64x2.add(t2, t3));
  let low = f64x2.extract_lane(s, 0) + f64x2.extract_lane(s, 1);
  let high = f64x2.extract_lane(t, 0) + f64x2.extract_lane(t, 1);
  for (; k < n; k++, a += 8, b += 8, x += 8) {
    low += f64.load(a) * f64.load(x);
    high += f64.load(b) * f64.load(x);
  }
  return f64x2.replace_lane(f64x2.splat(low), 1, high);
}
