/**
 * Passes of a self-sorting fast Fourier transform of radix 4 (Stockham's arrangement: Cochran et al. 1967, "What is the
 * fast Fourier transform?"; Van Loan 1992, section 1.7), real and imaginary parts kept apart. Which passes, and which
 * factors, is the caller's (trainer/kernels/fourier.ts). Pointers are byte offsets, sizes are counted in elements.
 */

/**
 * One pass: y[q + s (4p + j)] = w^(jp) Σ_l (-i)^(jl) x[q + s (p + m l)], q < s, p < m, from x to y. `factors` holds, for
 * w = exp(-2πi / 4m), the tables cos and sin of w^p, w^2p, w^3p, each of m.
 */
export function pass4(xr: usize, xi: usize, yr: usize, yi: usize, factors: usize, m: i32, s: i32): void {
  if (s == 1) {
    firstPass4(xr, xi, yr, yi, factors, m);
    return;
  }
  const table = (<usize>m) << 3;
  const step = (<usize>s) << 3;
  const quarter = table * <usize>s;
  for (let p = 0; p < m; p++, factors += 8) {
    const c1 = v128.load_splat<f64>(factors);
    const s1 = v128.load_splat<f64>(factors + table);
    const c2 = v128.load_splat<f64>(factors + 2 * table);
    const s2 = v128.load_splat<f64>(factors + 3 * table);
    const c3 = v128.load_splat<f64>(factors + 4 * table);
    const s3 = v128.load_splat<f64>(factors + 5 * table);
    const from = <usize>p * step;
    const to = from << 2;
    for (let q: usize = 0; q < step; q += 16) {
      const at = from + q;
      const ar = v128.load(xr + at);
      const ai = v128.load(xi + at);
      const br = v128.load(xr + at + quarter);
      const bi = v128.load(xi + at + quarter);
      const cr = v128.load(xr + at + 2 * quarter);
      const ci = v128.load(xi + at + 2 * quarter);
      const dr = v128.load(xr + at + 3 * quarter);
      const di = v128.load(xi + at + 3 * quarter);
      const evenR = f64x2.add(ar, cr);
      const evenI = f64x2.add(ai, ci);
      const oddR = f64x2.add(br, dr);
      const oddI = f64x2.add(bi, di);
      const gapR = f64x2.sub(ar, cr);
      const gapI = f64x2.sub(ai, ci);
      const turnR = f64x2.sub(bi, di);
      const turnI = f64x2.sub(dr, br);
      const out = to + q;
      v128.store(yr + out, f64x2.add(evenR, oddR));
      v128.store(yi + out, f64x2.add(evenI, oddI));
      const r1 = f64x2.add(gapR, turnR);
      const i1 = f64x2.add(gapI, turnI);
      v128.store(yr + out + step, f64x2.sub(f64x2.mul(r1, c1), f64x2.mul(i1, s1)));
      v128.store(yi + out + step, f64x2.add(f64x2.mul(r1, s1), f64x2.mul(i1, c1)));
      const r2 = f64x2.sub(evenR, oddR);
      const i2 = f64x2.sub(evenI, oddI);
      v128.store(yr + out + 2 * step, f64x2.sub(f64x2.mul(r2, c2), f64x2.mul(i2, s2)));
      v128.store(yi + out + 2 * step, f64x2.add(f64x2.mul(r2, s2), f64x2.mul(i2, c2)));
      const r3 = f64x2.sub(gapR, turnR);
      const i3 = f64x2.sub(gapI, turnI);
      v128.store(yr + out + 3 * step, f64x2.sub(f64x2.mul(r3, c3), f64x2.mul(i3, s3)));
      v128.store(yi + out + 3 * step, f64x2.add(f64x2.mul(r3, s3), f64x2.mul(i3, c3)));
    }
  }
}

/** The first pass, s = 1: two p at a time, and the four results of each side by side. */
function firstPass4(xr: usize, xi: usize, yr: usize, yi: usize, factors: usize, m: i32): void {
  if (m == 1) {
    four(xr, xi, yr, yi);
    return;
  }
  const table = (<usize>m) << 3;
  for (let p: usize = 0; p < table; p += 16) {
    const ar = v128.load(xr + p);
    const ai = v128.load(xi + p);
    const br = v128.load(xr + p + table);
    const bi = v128.load(xi + p + table);
    const cr = v128.load(xr + p + 2 * table);
    const ci = v128.load(xi + p + 2 * table);
    const dr = v128.load(xr + p + 3 * table);
    const di = v128.load(xi + p + 3 * table);
    const evenR = f64x2.add(ar, cr);
    const evenI = f64x2.add(ai, ci);
    const oddR = f64x2.add(br, dr);
    const oddI = f64x2.add(bi, di);
    const gapR = f64x2.sub(ar, cr);
    const gapI = f64x2.sub(ai, ci);
    const turnR = f64x2.sub(bi, di);
    const turnI = f64x2.sub(dr, br);
    const f = factors + p;
    const r0 = f64x2.add(evenR, oddR);
    const i0 = f64x2.add(evenI, oddI);
    let r = f64x2.add(gapR, turnR);
    let i = f64x2.add(gapI, turnI);
    let c = v128.load(f);
    let s = v128.load(f + table);
    const r1 = f64x2.sub(f64x2.mul(r, c), f64x2.mul(i, s));
    const i1 = f64x2.add(f64x2.mul(r, s), f64x2.mul(i, c));
    r = f64x2.sub(evenR, oddR);
    i = f64x2.sub(evenI, oddI);
    c = v128.load(f + 2 * table);
    s = v128.load(f + 3 * table);
    const r2 = f64x2.sub(f64x2.mul(r, c), f64x2.mul(i, s));
    const i2 = f64x2.add(f64x2.mul(r, s), f64x2.mul(i, c));
    r = f64x2.sub(gapR, turnR);
    i = f64x2.sub(gapI, turnI);
    c = v128.load(f + 4 * table);
    s = v128.load(f + 5 * table);
    const r3 = f64x2.sub(f64x2.mul(r, c), f64x2.mul(i, s));
    const i3 = f64x2.add(f64x2.mul(r, s), f64x2.mul(i, c));
    storeFours(yr + 4 * p, r0, r1, r2, r3);
    storeFours(yi + 4 * p, i0, i1, i2, i3);
  }
}

function storeFours(to: usize, a: v128, b: v128, c: v128, d: v128): void {
  v128.store(to, v128.shuffle<f64>(a, b, 0, 2));
  v128.store(to, v128.shuffle<f64>(c, d, 0, 2), 16);
  v128.store(to, v128.shuffle<f64>(a, b, 1, 3), 32);
  v128.store(to, v128.shuffle<f64>(c, d, 1, 3), 48);
}

/** The transform of four values. */
function four(xr: usize, xi: usize, yr: usize, yi: usize): void {
  const evenR = f64.load(xr) + f64.load(xr, 16);
  const evenI = f64.load(xi) + f64.load(xi, 16);
  const oddR = f64.load(xr, 8) + f64.load(xr, 24);
  const oddI = f64.load(xi, 8) + f64.load(xi, 24);
  const gapR = f64.load(xr) - f64.load(xr, 16);
  const gapI = f64.load(xi) - f64.load(xi, 16);
  const turnR = f64.load(xi, 8) - f64.load(xi, 24);
  const turnI = f64.load(xr, 24) - f64.load(xr, 8);
  f64.store(yr, evenR + oddR);
  f64.store(yi, evenI + oddI);
  f64.store(yr, gapR + turnR, 8);
  f64.store(yi, gapI + turnI, 8);
  f64.store(yr, evenR - oddR, 16);
  f64.store(yi, evenI - oddI, 16);
  f64.store(yr, gapR - turnR, 24);
  f64.store(yi, gapI - turnI, 24);
}

/** The last pass where the length is no power of four: y[q] = x[q] + x[q + s], y[q + s] = x[q] - x[q + s]. */
export function pass2(xr: usize, xi: usize, yr: usize, yi: usize, s: i32): void {
  const half = (<usize>s) << 3;
  if (s == 1) {
    const ar = f64.load(xr);
    const ai = f64.load(xi);
    const br = f64.load(xr, 8);
    const bi = f64.load(xi, 8);
    f64.store(yr, ar + br);
    f64.store(yi, ai + bi);
    f64.store(yr, ar - br, 8);
    f64.store(yi, ai - bi, 8);
    return;
  }
  for (let q: usize = 0; q < half; q += 16) {
    const ar = v128.load(xr + q);
    const ai = v128.load(xi + q);
    const br = v128.load(xr + q + half);
    const bi = v128.load(xi + q + half);
    v128.store(yr + q, f64x2.add(ar, br));
    v128.store(yi + q, f64x2.add(ai, bi));
    v128.store(yr + q + half, f64x2.sub(ar, br));
    v128.store(yi + q + half, f64x2.sub(ai, bi));
  }
}

/** Splits 2n values in turn into n real and n imaginary parts. */
export function split(x: usize, re: usize, im: usize, n: i32): void {
  let k = 0;
  for (; k + 1 < n; k += 2, x += 32, re += 16, im += 16) {
    const a = v128.load(x);
    const b = v128.load(x, 16);
    v128.store(re, v128.shuffle<f64>(a, b, 0, 2));
    v128.store(im, v128.shuffle<f64>(a, b, 1, 3));
  }
  if (k < n) {
    f64.store(re, f64.load(x));
    f64.store(im, f64.load(x, 8));
  }
}

/** Joins n real and n imaginary parts into 2n values in turn, times f. */
export function join(x: usize, re: usize, im: usize, f: f64, n: i32): void {
  const factor = f64x2.splat(f);
  let k = 0;
  for (; k + 1 < n; k += 2, x += 32, re += 16, im += 16) {
    const a = f64x2.mul(v128.load(re), factor);
    const b = f64x2.mul(v128.load(im), factor);
    v128.store(x, v128.shuffle<f64>(a, b, 0, 2));
    v128.store(x, v128.shuffle<f64>(a, b, 1, 3), 16);
  }
  if (k < n) {
    f64.store(x, f64.load(re) * f);
    f64.store(x, f64.load(im) * f, 8);
  }
}

/**
 * From the transform Z of n pairs of real values to the first n + 1 values X of the transform of the 2n real ones, in place:
 * X_k = (Z_k + Z'_(n-k)) / 2 - i w^k (Z_k - Z'_(n-k)) / 2, w = exp(-πi / n). `factors` holds cos, then sin, of w^k, k <= n/2.
 */
export function untangle(re: usize, im: usize, factors: usize, n: i32): void {
  const last = (<usize>n) << 3;
  const sines = factors + (((<usize>n >> 1) + 1) << 3);
  const r0 = f64.load(re);
  const i0 = f64.load(im);
  f64.store(re, r0 + i0);
  f64.store(im, 0);
  f64.store(re + last, r0 - i0);
  f64.store(im + last, 0);
  let k: usize = 8;
  const half = f64x2.splat(0.5);
  for (; (k << 1) + 16 < last; k += 16) {
    const other = last - k - 8;
    const ar = v128.load(re + k);
    const ai = v128.load(im + k);
    const br = reversed(re + other);
    const bi = reversed(im + other);
    const sumR = f64x2.mul(half, f64x2.add(ar, br));
    const sumI = f64x2.mul(half, f64x2.sub(ai, bi));
    const gapR = f64x2.mul(half, f64x2.add(ai, bi));
    const gapI = f64x2.mul(half, f64x2.sub(br, ar));
    const c = v128.load(factors + k);
    const s = v128.load(sines + k);
    const turnR = f64x2.sub(f64x2.mul(gapR, c), f64x2.mul(gapI, s));
    const turnI = f64x2.add(f64x2.mul(gapR, s), f64x2.mul(gapI, c));
    v128.store(re + k, f64x2.add(sumR, turnR));
    v128.store(im + k, f64x2.add(sumI, turnI));
    storeReversed(re + other, f64x2.sub(sumR, turnR));
    storeReversed(im + other, f64x2.sub(turnI, sumI));
  }
  for (; k << 1 <= last; k += 8) {
    const other = last - k;
    const ar = f64.load(re + k);
    const ai = f64.load(im + k);
    const br = f64.load(re + other);
    const bi = f64.load(im + other);
    const sumR = 0.5 * (ar + br);
    const sumI = 0.5 * (ai - bi);
    const gapR = 0.5 * (ai + bi);
    const gapI = 0.5 * (br - ar);
    const c = f64.load(factors + k);
    const s = f64.load(sines + k);
    const turnR = gapR * c - gapI * s;
    const turnI = gapR * s + gapI * c;
    f64.store(re + k, sumR + turnR);
    f64.store(im + k, sumI + turnI);
    f64.store(re + other, sumR - turnR);
    f64.store(im + other, turnI - sumI);
  }
}

/** The way back: from X of n + 1 values to Z of n, in place, times two. */
export function tangle(re: usize, im: usize, factors: usize, n: i32): void {
  const last = (<usize>n) << 3;
  const sines = factors + (((<usize>n >> 1) + 1) << 3);
  const first = f64.load(re);
  const end = f64.load(re + last);
  f64.store(re, first + end);
  f64.store(im, first - end);
  let k: usize = 8;
  for (; (k << 1) + 16 < last; k += 16) {
    const other = last - k - 8;
    const ar = v128.load(re + k);
    const ai = v128.load(im + k);
    const br = reversed(re + other);
    const bi = reversed(im + other);
    const sumR = f64x2.add(ar, br);
    const sumI = f64x2.sub(ai, bi);
    const turnR = f64x2.sub(ar, br);
    const turnI = f64x2.add(ai, bi);
    const c = v128.load(factors + k);
    const s = v128.load(sines + k);
    const gapR = f64x2.add(f64x2.mul(turnR, c), f64x2.mul(turnI, s));
    const gapI = f64x2.sub(f64x2.mul(turnI, c), f64x2.mul(turnR, s));
    v128.store(re + k, f64x2.sub(sumR, gapI));
    v128.store(im + k, f64x2.add(sumI, gapR));
    storeReversed(re + other, f64x2.add(sumR, gapI));
    storeReversed(im + other, f64x2.sub(gapR, sumI));
  }
  for (; k << 1 <= last; k += 8) {
    const other = last - k;
    const ar = f64.load(re + k);
    const ai = f64.load(im + k);
    const br = f64.load(re + other);
    const bi = f64.load(im + other);
    const sumR = ar + br;
    const sumI = ai - bi;
    const turnR = ar - br;
    const turnI = ai + bi;
    const c = f64.load(factors + k);
    const s = f64.load(sines + k);
    const gapR = turnR * c + turnI * s;
    const gapI = turnI * c - turnR * s;
    f64.store(re + k, sumR - gapI);
    f64.store(im + k, sumI + gapR);
    f64.store(re + other, sumR + gapI);
    f64.store(im + other, gapR - sumI);
  }
}

function reversed(at: usize): v128 {
  const v = v128.load(at);
  return v128.shuffle<f64>(v, v, 1, 0);
}

function storeReversed(at: usize, v: v128): void {
  v128.store(at, v128.shuffle<f64>(v, v, 1, 0));
}
