/**
 * Dense row-major products on typed arrays. Four rows of the right factor are folded into two rows of the result at a time:
 * what is read serves twice, and every sum keeps the order of the textbook triple loop, several times as quickly. Larger
 * products go through ordered-product.ts, to the same bits.
 */
import { addInLanes } from './ordered-product.ts';

/**
 * The product A B.
 *
 * shapes  a (n × k), b (k × m), result (n × m); row-major
 * units   as the factors'
 * throws  nothing; a length that disagrees with the shape is the caller's mistake and gives NaN
 * source  definition
 * cost    n k m multiplications
 */
export function multiply(a: Float64Array, b: Float64Array, n: number, k: number, m: number): Float64Array {
  const out = new Float64Array(n * m);
  if (addInLanes(out, a, b, n, k, m, false)) return out;
  for (let i = 0; i < n; i += 2) {
    const to = out.subarray(i * m, i * m + m);
    const next = i + 1 < n ? out.subarray(i * m + m, i * m + 2 * m) : null;
    const under = next === null ? 0 : k;
    let l = 0;
    for (; l + 3 < k; l += 4) {
      const at = i * k + l;
      addFour(to, next, b, l * m, m, a, at, 1, at + under);
    }
    for (; l < k; l++) {
      addOne(to, b, l * m, m, a[i * k + l]);
      if (next !== null) addOne(next, b, l * m, m, a[i * k + k + l]);
    }
  }
  return out;
}

/**
 * The product A' B, without forming the transpose.
 *
 * shapes  a (k × n), b (k × m), result (n × m); row-major
 * units   as the factors'
 * throws  nothing
 * source  definition
 * cost    n k m multiplications
 */
export function multiplyTransposed(a: Float64Array, b: Float64Array, n: number, k: number, m: number): Float64Array {
  const out = new Float64Array(n * m);
  addTransposed(out, a, b, n, k, m);
  return out;
}

/**
 * Adds A' B to a matrix, row after row of the factors.
 *
 * shapes  out (n × m); a (k × n), b (k × m), longer ones cut off; row-major
 * units   as the factors'
 * throws  nothing
 * source  definition
 * cost    n k m multiplications
 */
export function addTransposed(
  out: Float64Array,
  a: Float64Array,
  b: Float64Array,
  n: number,
  k: number,
  m: number,
): void {
  if (addInLanes(out, a, b, n, k, m, true)) return;
  let l = 0;
  for (; l + 3 < k; l += 4) {
    for (let i = 0; i < n; i += 2) {
      const to = out.subarray(i * m, i * m + m);
      const next = i + 1 < n ? out.subarray(i * m + m, i * m + 2 * m) : null;
      const at = l * n + i;
      addFour(to, next, b, l * m, m, a, at, n, next === null ? at : at + 1);
    }
  }
  for (; l < k; l++) {
    for (let i = 0; i < n; i++) addOne(out.subarray(i * m, i * m + m), b, l * m, m, a[l * n + i]);
  }
}

/**
 * The transpose.
 *
 * shapes  a (n × m), result (m × n); row-major
 * units   as a's
 * throws  nothing
 * source  definition
 * cost    n m copies
 */
export function transpose(a: Float64Array, n: number, m: number): Float64Array {
  const out = new Float64Array(n * m);
  for (let i = 0; i < n; i++) for (let j = 0; j < m; j++) out[j * n + i] = a[i * m + j];
  return out;
}

/**
 * Folds rows l to l + 3 of b, from b[from] on, into one row of the result or two: by a[at], a[at + stride] … into the first,
 * by a[under], a[under + stride] … into the second.
 */
function addFour(
  to: Float64Array,
  next: Float64Array | null,
  b: Float64Array,
  from: number,
  m: number,
  a: Float64Array,
  at: number,
  stride: number,
  under: number,
): void {
  const r1 = from + m;
  const r2 = r1 + m;
  const r3 = r2 + m;
  const f0 = a[at];
  const f1 = a[at + stride];
  const f2 = a[at + 2 * stride];
  const f3 = a[at + 3 * stride];
  if (next === null) {
    for (let j = 0; j < m; j++) to[j] = to[j] + f0 * b[from + j] + f1 * b[r1 + j] + f2 * b[r2 + j] + f3 * b[r3 + j];
    return;
  }
  const g0 = a[under];
  const g1 = a[under + stride];
  const g2 = a[under + 2 * stride];
  const g3 = a[under + 3 * stride];
  for (let j = 0; j < m; j++) {
    const b0 = b[from + j];
    const b1 = b[r1 + j];
    const b2 = b[r2 + j];
    const b3 = b[r3 + j];
    to[j] = to[j] + f0 * b0 + f1 * b1 + f2 * b2 + f3 * b3;
    next[j] = next[j] + g0 * b0 + g1 * b1 + g2 * b2 + g3 * b3;
  }
}

function addOne(to: Float64Array, b: Float64Array, from: number, m: number, f: number): void {
  for (let j = 0; j < m; j++) to[j] = to[j] + f * b[from + j];
}
