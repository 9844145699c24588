/**
 * The small triangular blocks left over by the blocked factorisations and solves of trainer/kernels/triangular.ts: a few
 * dozen rows, all of them in cache. Pointers are byte offsets, strides and sizes are counted in elements.
 */

/** Lower Cholesky factor of a block, in place; -1, or the row whose pivot is not a positive number. */
export function factorBlock(a: usize, stride: i32, n: i32): i32 {
  const next = (<usize>stride) << 3;
  for (let i = 0; i < n; i++) {
    const row = a + <usize>i * next;
    for (let j = 0; j <= i; j++) {
      const other = a + <usize>j * next;
      const rest = f64.load(row + (<usize>j << 3)) - dotBlock(row, other, j);
      if (j < i) {
        f64.store(row + (<usize>j << 3), rest / f64.load(other + (<usize>j << 3)));
      } else {
        if (!(rest > 0 && rest < Infinity)) return i;
        f64.store(row + (<usize>j << 3), sqrt<f64>(rest));
      }
    }
  }
  return -1;
}

/** Σ a b in two lanes, low lane first; an odd last product is added last. */
function dotBlock(a: usize, b: usize, n: i32): f64 {
  let sum = f64x2.splat(0);
  let k = 0;
  for (; k + 1 < n; k += 2, a += 16, b += 16) sum = f64x2.add(sum, f64x2.mul(v128.load(a), v128.load(b)));
  let total = f64x2.extract_lane(sum, 0) + f64x2.extract_lane(sum, 1);
  if (k < n) total += f64.load(a) * f64.load(b);
  return total;
}

/** Solves L X = B in place for a block L of n rows and m right-hand sides, row-major. */
export function lowerBlock(l: usize, lStride: i32, b: usize, bStride: i32, n: i32, m: i32): void {
  const lNext = (<usize>lStride) << 3;
  const bNext = (<usize>bStride) << 3;
  for (let i = 0; i < n; i++) {
    const to = b + <usize>i * bNext;
    const row = l + <usize>i * lNext;
    for (let k = 0; k < i; k++) takeRow(to, b + <usize>k * bNext, f64.load(row + (<usize>k << 3)), m);
    divideRow(to, f64.load(row + (<usize>i << 3)), m);
  }
}

/** Solves L' X = B in place. */
export function upperBlock(l: usize, lStride: i32, b: usize, bStride: i32, n: i32, m: i32): void {
  const lNext = (<usize>lStride) << 3;
  const bNext = (<usize>bStride) << 3;
  for (let i = n - 1; i >= 0; i--) {
    const to = b + <usize>i * bNext;
    const column = l + (<usize>i << 3);
    for (let k = i + 1; k < n; k++) takeRow(to, b + <usize>k * bNext, f64.load(column + <usize>k * lNext), m);
    divideRow(to, f64.load(column + <usize>i * lNext), m);
  }
}

/** Solves X R = A in place for an upper triangular block R of n columns, row by row. */
export function rightBlock(r: usize, rStride: i32, a: usize, aStride: i32, n: i32, rows: i32): void {
  const rNext = (<usize>rStride) << 3;
  const aNext = (<usize>aStride) << 3;
  for (let i = 0; i < rows; i++, a += aNext) {
    for (let k = 0; k < n; k++) {
      const pivotRow = r + <usize>k * rNext + (<usize>k << 3);
      const at = a + (<usize>k << 3);
      const x = f64.load(at) / f64.load(pivotRow);
      f64.store(at, x);
      takeRow(at + 8, pivotRow + 8, x, n - k - 1);
    }
  }
}

/** to -= f from. */
function takeRow(to: usize, from: usize, f: f64, m: i32): void {
  const factor = f64x2.splat(f);
  let j = 0;
  for (; j + 3 < m; j += 4, to += 32, from += 32) {
    v128.store(to, f64x2.sub(v128.load(to), f64x2.mul(factor, v128.load(from))));
    v128.store(to, f64x2.sub(v128.load(to, 16), f64x2.mul(factor, v128.load(from, 16))), 16);
  }
  for (; j < m; j++, to += 8, from += 8) f64.store(to, f64.load(to) - f * f64.load(from));
}

/** to /= f. */
function divideRow(to: usize, f: f64, m: i32): void {
  const divisor = f64x2.splat(f);
  let j = 0;
  for (; j + 1 < m; j += 2, to += 16) v128.store(to, f64x2.div(v128.load(to), divisor));
  if (j < m) f64.store(to, f64.load(to) / f);
}
