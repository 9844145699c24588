/** Small symmetric eigenproblems in falling order; the loops leave eigenvalues in the order in which they settled. */
import type { Pointer, SymmetricLoops } from './core.ts';

/** Bytes of scratch for n rows. */
export const symmetricBytes = (n: number): number => 8 * n * (n + 4);

/**
 * Diagonalises z in place: rows become eigenvectors, d their values, falling; false where a value did not settle, which
 * happens only to entries that are not finite.
 *
 * shapes  z (n × n) at `zAt`, d (n) at `dAt`, scratch of symmetricBytes(n)
 * units   any
 * throws  nothing
 * source  Wilkinson & Reinsch, Handbook for Automatic Computation, Linear Algebra (1971), contributions II/2 and II/4
 * cost    about 4 n³ multiplications
 */
export function symmetricRows(
  core: SymmetricLoops,
  z: Float64Array,
  d: Float64Array,
  scratch: Pointer,
  n: number,
): boolean {
  if (n > 0 && core.diagonalise64(z.byteOffset, d.byteOffset, scratch, n) !== 0) return false;
  for (let i = 0; i < n - 1; i++) {
    let k = i;
    for (let j = i + 1; j < n; j++) if (d[j] > d[k]) k = j;
    if (k !== i) exchange(z, d, n, i, k);
  }
  return true;
}

function exchange(z: Float64Array, d: Float64Array, n: number, i: number, k: number): void {
  const value = d[i];
  d[i] = d[k];
  d[k] = value;
  const row = z.slice(i * n, (i + 1) * n);
  z.copyWithin(i * n, k * n, (k + 1) * n);
  z.set(row, k * n);
}
