/**
 * Products of series at many distances, and features carried forward tick by tick, in the order of additions of plain
 * loops over time. Pointers are byte offsets, sizes are counted in elements.
 */

/**
 * Adds Σ a(t) b(t + n) for n = 0 … shifts - 1 over a whole number of fours, four running sums a shift: sums (shifts × 4),
 * each of every fourth t. Four shifts at a time.
 */
export function shiftedDots64(sums: usize, a: usize, b: usize, n: i32, shifts: i32): void {
  const end = a + (<usize>n << 3);
  let k = 0;
  for (; k + 3 < shifts; k += 4, b += 32, sums += 128) fourShifts(sums, a, b, end);
  for (; k < shifts; k++, b += 8, sums += 32) {
    let s0 = v128.load(sums);
    let s1 = v128.load(sums, 16);
    for (let x = a, y = b; x < end; x += 32, y += 32) {
      s0 = f64x2.add(s0, f64x2.mul(v128.load(x), v128.load(y)));
      s1 = f64x2.add(s1, f64x2.mul(v128.load(x, 16), v128.load(y, 16)));
    }
    v128.store(sums, s0);
    v128.store(sums, s1, 16);
  }
}

function fourShifts(sums: usize, a: usize, b: usize, end: usize): void {
  let s0 = v128.load(sums);
  let s1 = v128.load(sums, 16);
  let s2 = v128.load(sums, 32);
  let s3 = v128.load(sums, 48);
  let s4 = v128.load(sums, 64);
  let s5 = v128.load(sums, 80);
  let s6 = v128.load(sums, 96);
  let s7 = v128.load(sums, 112);
  for (; a < end; a += 32, b += 32) {
    const x = v128.load(a);
    const y = v128.load(a, 16);
    const middle = v128.load(b, 16);
    const odd = v128.load(b, 24);
    s0 = f64x2.add(s0, f64x2.mul(x, v128.load(b)));
    s1 = f64x2.add(s1, f64x2.mul(y, middle));
    s2 = f64x2.add(s2, f64x2.mul(x, v128.load(b, 8)));
    s3 = f64x2.add(s3, f64x2.mul(y, odd));
    s4 = f64x2.add(s4, f64x2.mul(x, middle));
    s5 = f64x2.add(s5, f64x2.mul(y, v128.load(b, 32)));
    s6 = f64x2.add(s6, f64x2.mul(x, odd));
    s7 = f64x2.add(s7, f64x2.mul(y, v128.load(b, 40)));
  }
  v128.store(sums, s0);
  v128.store(sums, s1, 16);
  v128.store(sums, s2, 32);
  v128.store(sums, s3, 48);
  v128.store(sums, s4, 64);
  v128.store(sums, s5, 80);
  v128.store(sums, s6, 96);
  v128.store(sums, s7, 112);
}

/**
 * Adds Σ x_a(t) x_b(t) of every two rows b <= a over a whole number of fours, four running sums a pair, each of every
 * fourth t: sums (rows (rows + 1) / 2 × 4), those of pair (a, b) at a (a + 1) / 2 + b. Rows lie `stride` apart. Two by two.
 */
export function pairedDots64(sums: usize, x: usize, stride: i32, rows: i32, n: i32): void {
  const step = <usize>stride << 3;
  const end = <usize>n << 3;
  let row = x;
  let to = sums;
  let a = 0;
  for (; a + 1 < rows; a += 2, row += step << 1) {
    const next = to + (<usize>(a + 1) << 5);
    let column = x;
    let at: usize = 0;
    for (let b = 0; b < a; b += 2, column += step << 1, at += 64) {
      twoByTwo(to + at, next + at, row, row + step, column, column + step, end);
    }
    onePair(to + at, row, row, end);
    onePair(next + at, row + step, row, end);
    onePair(next + at + 32, row + step, row + step, end);
    to = next + (<usize>(a + 2) << 5);
  }
  if (a == rows) return;
  for (let b = 0; b <= a; b++, x += step, to += 32) onePair(to, row, x, end);
}

function onePair(sums: usize, a: usize, b: usize, end: usize): void {
  let s0 = v128.load(sums);
  let s1 = v128.load(sums, 16);
  for (let t: usize = 0; t < end; t += 32) {
    s0 = f64x2.add(s0, f64x2.mul(v128.load(a + t), v128.load(b + t)));
    s1 = f64x2.add(s1, f64x2.mul(v128.load(a + t, 16), v128.load(b + t, 16)));
  }
  v128.store(sums, s0);
  v128.store(sums, s1, 16);
}

/** The sums of two rows with two others; those of each row side by side. */
function twoByTwo(to: usize, next: usize, a: usize, a1: usize, b: usize, b1: usize, end: usize): void {
  let s0 = v128.load(to);
  let s1 = v128.load(to, 16);
  let s2 = v128.load(to, 32);
  let s3 = v128.load(to, 48);
  let s4 = v128.load(next);
  let s5 = v128.load(next, 16);
  let s6 = v128.load(next, 32);
  let s7 = v128.load(next, 48);
  for (let t: usize = 0; t < end; t += 32) {
    const x0 = v128.load(a + t);
    const y0 = v128.load(a1 + t);
    const u0 = v128.load(b + t);
    const v0 = v128.load(b1 + t);
    s0 = f64x2.add(s0, f64x2.mul(x0, u0));
    s2 = f64x2.add(s2, f64x2.mul(x0, v0));
    s4 = f64x2.add(s4, f64x2.mul(y0, u0));
    s6 = f64x2.add(s6, f64x2.mul(y0, v0));
    const x1 = v128.load(a + t, 16);
    const y1 = v128.load(a1 + t, 16);
    const u1 = v128.load(b + t, 16);
    const v1 = v128.load(b1 + t, 16);
    s1 = f64x2.add(s1, f64x2.mul(x1, u1));
    s3 = f64x2.add(s3, f64x2.mul(x1, v1));
    s5 = f64x2.add(s5, f64x2.mul(y1, u1));
    s7 = f64x2.add(s7, f64x2.mul(y1, v1));
  }
  v128.store(to, s0);
  v128.store(to, s1, 16);
  v128.store(to, s2, 32);
  v128.store(to, s3, 48);
  v128.store(next, s4);
  v128.store(next, s5, 16);
  v128.store(next, s6, 32);
  v128.store(next, s7, 48);
}

/**
 * Moves a row of features forward over `steps` ticks, each tick's row (n) written after the last: with c the change of that
 * tick, f = re f + own c for the first `real` of them, and (f, g) = (re f - im g + own c, re g + im f + own c) for the pairs
 * after. `re`, `im` and `own` have an entry a feature, that of `im` negative at the first of a pair. Rows lie
 * `rowStride` apart.
 */
export function carryForward64(
  rows: usize,
  rowStride: i32,
  from: usize,
  re: usize,
  im: usize,
  own: usize,
  real: i32,
  n: i32,
  changes: usize,
  steps: i32,
): void {
  for (let t = 0; t < steps; t++) {
    const change = f64.load(changes);
    const both = f64x2.splat(change);
    let k = 0;
    let at: usize = 0;
    for (; k + 1 < real; k += 2, at += 16) {
      const moved = f64x2.mul(v128.load(re + at), v128.load(from + at));
      v128.store(rows + at, f64x2.add(moved, f64x2.mul(v128.load(own + at), both)));
    }
    if (k < real) {
      f64.store(rows + at, f64.load(re + at) * f64.load(from + at) + f64.load(own + at) * change);
      k++;
      at += 8;
    }
    for (; k < n; k += 2, at += 16) {
      const x = v128.load(from + at);
      const turned = f64x2.mul(v128.load(im + at), v128.shuffle<f64>(x, x, 1, 0));
      const moved = f64x2.add(f64x2.mul(v128.load(re + at), x), turned);
      v128.store(rows + at, f64x2.add(moved, f64x2.mul(v128.load(own + at), both)));
    }
    from = rows;
    rows += <usize>rowStride << 3;
    changes += 8;
  }
}

/**
 * C (m × n) += A'B one step after another: A (steps × m), B (steps × n), every sum of C in the order of the steps. Of four
 * rows and four columns the sums stay in registers.
 */
export function orderedProducts64(c: usize, a: usize, b: usize, m: i32, n: i32, steps: i32): void {
  const cStride = <usize>n << 3;
  const aStride = <usize>m << 3;
  for (let i = 0; i < m; i += 4, a += 32, c += cStride << 2) {
    let at: usize = 0;
    let j = 0;
    if (i + 3 < m) {
      for (; j + 3 < n; j += 4, at += 32) fourByFour(c + at, cStride, a, aStride, b + at, steps);
    }
    const rows = min(4, m - i);
    for (; j < n; j++, at += 8) {
      for (let k = 0; k < rows; k++) {
        const place = c + at + <usize>k * cStride;
        let sum = f64.load(place);
        let x = a + (<usize>k << 3);
        let y = b + at;
        for (let t = 0; t < steps; t++, x += aStride, y += cStride) sum += f64.load(x) * f64.load(y);
        f64.store(place, sum);
      }
    }
  }
}

function fourByFour(c: usize, cStride: usize, a: usize, aStride: usize, b: usize, steps: i32): void {
  const c1 = c + cStride;
  const c2 = c1 + cStride;
  const c3 = c2 + cStride;
  let s0 = v128.load(c);
  let s1 = v128.load(c, 16);
  let s2 = v128.load(c1);
  let s3 = v128.load(c1, 16);
  let s4 = v128.load(c2);
  let s5 = v128.load(c2, 16);
  let s6 = v128.load(c3);
  let s7 = v128.load(c3, 16);
  for (let t = 0; t < steps; t++, a += aStride, b += cStride) {
    const x = v128.load(b);
    const y = v128.load(b, 16);
    const f0 = v128.load64_splat(a);
    const f1 = v128.load64_splat(a, 8);
    const f2 = v128.load64_splat(a, 16);
    const f3 = v128.load64_splat(a, 24);
    s0 = f64x2.add(s0, f64x2.mul(x, f0));
    s1 = f64x2.add(s1, f64x2.mul(y, f0));
    s2 = f64x2.add(s2, f64x2.mul(x, f1));
    s3 = f64x2.add(s3, f64x2.mul(y, f1));
    s4 = f64x2.add(s4, f64x2.mul(x, f2));
    s5 = f64x2.add(s5, f64x2.mul(y, f2));
    s6 = f64x2.add(s6, f64x2.mul(x, f3));
    s7 = f64x2.add(s7, f64x2.mul(y, f3));
  }
  v128.store(c, s0);
  v128.store(c, s1, 16);
  v128.store(c1, s2);
  v128.store(c1, s3, 16);
  v128.store(c2, s4);
  v128.store(c2, s5, 16);
  v128.store(c3, s6);
  v128.store(c3, s7, 16);
}
