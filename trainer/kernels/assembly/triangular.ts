/**
 * The small triangular blocks left over by the blocked factorisations and solves of trainer/kernels/triangular.ts: a few
 * dozen rows, all of them in cache. Solves take eight right-hand sides at a time, kept in registers while a row is worked
 * out. Pointers are byte offsets, strides and sizes are counted in elements; `tile` is scratch for 8 n numbers.
 */

/**
 * Cholesky factor of a block: L in place, L' (n × n, dense) at `upper`, whose part below the diagonal is left as it was.
 * Returns -1, or the row whose pivot is not a positive number.
 */
export function factorBlock(a: usize, stride: i32, n: i32, upper: usize): i32 {
  const next = (<usize>stride) << 3;
  const wide = (<usize>n) << 3;
  turn(upper, wide, a, next, n);
  let row = upper;
  for (let k = 0; k < n; k++, row += wide) {
    const pivot = f64.load(row + (<usize>k << 3));
    if (!(pivot > 0 && pivot < Infinity)) return k;
    const root = sqrt<f64>(pivot);
    f64.store(row + (<usize>k << 3), root);
    divideRow(row + (<usize>(k + 1) << 3), root, n - k - 1);
    let other = row + wide;
    for (let i = k + 1; i < n; i++, other += wide) {
      const at = <usize>i << 3;
      takeRow(other + at, row + at, f64.load(row + at), n - i);
    }
  }
  for (let i = 0; i < n; i++, a += next, upper += 8) {
    for (let j: usize = 0; j <= <usize>i; j++) f64.store(a + (j << 3), f64.load(upper + j * wide));
  }
  return -1;
}

/** The upper triangle at `to` from the lower one at `from`. */
function turn(to: usize, toNext: usize, from: usize, fromNext: usize, n: i32): void {
  for (let i = 0; i < n; i++, to += 8, from += fromNext) {
    for (let j: usize = 0; j <= <usize>i; j++) f64.store(to + j * toNext, f64.load(from + (j << 3)));
  }
}

/** Solves L X = B in place for a block L of n rows and m right-hand sides, row-major. */
export function lowerBlock(l: usize, lStride: i32, b: usize, bStride: i32, n: i32, m: i32, tile: usize): void {
  const lNext = (<usize>lStride) << 3;
  const bNext = (<usize>bStride) << 3;
  let j = 0;
  for (; j + 7 < m; j += 8, b += 64) forward(l, lNext, 8, b, bNext, n);
  if (j == m) return;
  copyColumns(tile, 64, b, bNext, n, m - j, true);
  forward(l, lNext, 8, tile, 64, n);
  copyColumns(b, bNext, tile, 64, n, m - j, false);
}

/** Solves L' X = B in place. */
export function upperBlock(l: usize, lStride: i32, b: usize, bStride: i32, n: i32, m: i32, tile: usize): void {
  const lNext = (<usize>lStride) << 3;
  const bNext = (<usize>bStride) << 3;
  let j = 0;
  for (; j + 7 < m; j += 8, b += 64) backward(l, lNext, b, bNext, n);
  if (j == m) return;
  copyColumns(tile, 64, b, bNext, n, m - j, true);
  backward(l, lNext, tile, 64, n);
  copyColumns(b, bNext, tile, 64, n, m - j, false);
}

/** Solves X R = A in place for an upper triangular block R of n columns: R' X' = A', eight rows of A at a time. */
export function rightBlock(r: usize, rStride: i32, a: usize, aStride: i32, n: i32, rows: i32, tile: usize): void {
  const rNext = (<usize>rStride) << 3;
  const aNext = (<usize>aStride) << 3;
  for (let i = 0; i < rows; i += 8, a += 8 * aNext) {
    const inside = rows - i < 8 ? rows - i : 8;
    for (let k: usize = 0; k < <usize>inside; k++) {
      const from = a + k * aNext;
      const to = tile + (k << 3);
      for (let j: usize = 0; j < <usize>n; j++) f64.store(to + (j << 6), f64.load(from + (j << 3)));
    }
    for (let k: usize = inside; k < 8; k++) {
      for (let j: usize = 0; j < <usize>n; j++) f64.store(tile + (j << 6) + (k << 3), 0);
    }
    forward(r, 8, rNext, tile, 64, n);
    for (let k: usize = 0; k < <usize>inside; k++) {
      const to = a + k * aNext;
      const from = tile + (k << 3);
      for (let j: usize = 0; j < <usize>n; j++) f64.store(to + (j << 3), f64.load(from + (j << 6)));
    }
  }
}

/** L X = B for eight columns of X; element (i, k) of L at l + i lRow + k lStep. */
function forward(l: usize, lRow: usize, lStep: usize, x: usize, next: usize, n: i32): void {
  let to = x;
  for (let i = 0; i < n; i++, to += next, l += lRow) {
    let a = v128.load(to);
    let b = v128.load(to, 16);
    let c = v128.load(to, 32);
    let d = v128.load(to, 48);
    let at = l;
    for (let from = x; from < to; from += next, at += lStep) {
      const f = v128.load_splat<f64>(at);
      a = f64x2.sub(a, f64x2.mul(f, v128.load(from)));
      b = f64x2.sub(b, f64x2.mul(f, v128.load(from, 16)));
      c = f64x2.sub(c, f64x2.mul(f, v128.load(from, 32)));
      d = f64x2.sub(d, f64x2.mul(f, v128.load(from, 48)));
    }
    const pivot = v128.load_splat<f64>(at);
    v128.store(to, f64x2.div(a, pivot));
    v128.store(to, f64x2.div(b, pivot), 16);
    v128.store(to, f64x2.div(c, pivot), 32);
    v128.store(to, f64x2.div(d, pivot), 48);
  }
}

/** L' X = B for eight columns of X. */
function backward(l: usize, lNext: usize, x: usize, next: usize, n: i32): void {
  const end = x + next * n;
  let to = end - next;
  let diagonal = l + (lNext + 8) * (n - 1);
  for (let i = 0; i < n; i++, to -= next, diagonal -= lNext + 8) {
    let a = v128.load(to);
    let b = v128.load(to, 16);
    let c = v128.load(to, 32);
    let d = v128.load(to, 48);
    let at = diagonal + lNext;
    for (let from = to + next; from < end; from += next, at += lNext) {
      const f = v128.load_splat<f64>(at);
      a = f64x2.sub(a, f64x2.mul(f, v128.load(from)));
      b = f64x2.sub(b, f64x2.mul(f, v128.load(from, 16)));
      c = f64x2.sub(c, f64x2.mul(f, v128.load(from, 32)));
      d = f64x2.sub(d, f64x2.mul(f, v128.load(from, 48)));
    }
    const pivot = v128.load_splat<f64>(diagonal);
    v128.store(to, f64x2.div(a, pivot));
    v128.store(to, f64x2.div(b, pivot), 16);
    v128.store(to, f64x2.div(c, pivot), 32);
    v128.store(to, f64x2.div(d, pivot), 48);
  }
}

/** Copies fewer than eight columns; the rest of a padded row is zero. */
function copyColumns(
  to: usize,
  toNext: usize,
  from: usize,
  fromNext: usize,
  n: i32,
  columns: i32,
  isPadded: bool,
): void {
  for (let i = 0; i < n; i++, to += toNext, from += fromNext) {
    for (let j: usize = 0; j < <usize>columns; j++) f64.store(to + (j << 3), f64.load(from + (j << 3)));
    if (isPadded) for (let j: usize = columns; j < 8; j++) f64.store(to + (j << 3), 0);
  }
}

/** to -= f from. */
function takeRow(to: usize, from: usize, f: f64, m: i32): void {
  const factor = f64x2.splat(f);
  let j = 0;
  for (; j + 1 < m; j += 2, to += 16, from += 16) {
    v128.store(to, f64x2.sub(v128.load(to), f64x2.mul(factor, v128.load(from))));
  }
  if (j < m) f64.store(to, f64.load(to) - f * f64.load(from));
}

/** to /= f. */
function divideRow(to: usize, f: f64, m: i32): void {
  const divisor = f64x2.splat(f);
  let j = 0;
  for (; j + 1 < m; j += 2, to += 16) v128.store(to, f64x2.div(v128.load(to), divisor));
  if (j < m) f64.store(to, f64.load(to) / f);
}
