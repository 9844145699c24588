/**
 * Dense row-major products on typed arrays. Four rows of the right factor are folded in at a time: V8 keeps one running
 * row in registers and cache, which is several times quicker than the textbook triple loop. Not for large matrices: no
 * tiling, since the trainer's matrices have a few hundred rows.
 */

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
  for (let i = 0; i < n; i++) {
    const to = out.subarray(i * m, i * m + m);
    let l = 0;
    for (; l + 3 < k; l += 4) {
      const at = i * k + l;
      addFour(to, b, l * m, m, a[at], a[at + 1], a[at + 2], a[at + 3]);
    }
    for (; l < k; l++) addOne(to, b, l * m, m, a[i * k + l]);
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
  let l = 0;
  for (; l + 3 < k; l += 4) {
    const r0 = l * n;
    for (let i = 0; i < n; i++) {
      const to = out.subarray(i * m, i * m + m);
      addFour(to, b, l * m, m, a[r0 + i], a[r0 + n + i], a[r0 + 2 * n + i], a[r0 + 3 * n + i]);
    }
  }
  for (; l < k; l++) {
    for (let i = 0; i < n; i++) addOne(out.subarray(i * m, i * m + m), b, l * m, m, a[l * n + i]);
  }
  return out;
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

function addFour(
  to: Float64Array,
  b: Float64Array,
  from: number,
  m: number,
  f0: number,
  f1: number,
  f2: number,
  f3: number,
): void {
  const r1 = from + m;
  const r2 = r1 + m;
  const r3 = r2 + m;
  for (let j = 0; j < m; j++) to[j] = to[j] + f0 * b[from + j] + f1 * b[r1 + j] + f2 * b[r2 + j] + f3 * b[r3 + j];
}

function addOne(to: Float64Array, b: Float64Array, from: number, m: number, f: number): void {
  for (let j = 0; j < m; j++) to[j] = to[j] + f * b[from + j];
}
