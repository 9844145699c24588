/**
 * The fast Walsh-Hadamard transform in single precision: n log₂ n additions and no product, so that a random rotation of
 * thousands of numbers costs microseconds and keeps nothing but signs.
 */

/** Least power of two that is n or more. */
export function powerOfTwo(n: number): number {
  return 2 ** Math.ceil(Math.log2(n));
}

/**
 * Transforms n numbers from `at` in place, unnormalised: twice gives n times what was there.
 *
 * shapes  x (at + n or more), n a power of two
 * units   as x
 * throws  nothing; n is checked where maps are made
 * source  Fino and Algazi, IEEE Transactions on Computers C-25 (1976), natural order; two levels a pass
 * cost    n log₂ n additions; each level rounds to single precision, relative error log₂ n · 6·10⁻⁸ at most
 */
export function hadamard(x: Float32Array, at: number, n: number): void {
  const end = at + n;
  let half = 1;
  if (Math.log2(n) % 2 === 1) {
    for (let i = at; i < end; i += 2) {
      const a = x[i];
      const b = x[i + 1];
      x[i] = a + b;
      x[i + 1] = a - b;
    }
    half = 2;
  }
  for (; half < n; half *= 4) {
    for (let base = at; base < end; base += 4 * half) {
      for (let i = base; i < base + half; i++) {
        const a = x[i];
        const b = x[i + half];
        const c = x[i + 2 * half];
        const d = x[i + 3 * half];
        const s = a + b;
        const t = a - b;
        const u = c + d;
        const v = c - d;
        x[i] = s + u;
        x[i + half] = t + v;
        x[i + 2 * half] = s - u;
        x[i + 3 * half] = t - v;
      }
    }
  }
}
