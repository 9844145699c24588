/** How far long rows are from orthonormal, and making them so again where rounding has added up. */
import { cholesky } from '../linalg/cholesky.ts';
import type { TallRows } from './tall-rows.ts';

/** Departure from the unit matrix beyond which a basis is set right; rounding alone stays a thousand times below. */
export const ORTHOGONALITY_BOUND = 1e-10;

/**
 * Largest entry of |V V' − I|.
 *
 * shapes  V the first k rows; scratch (k × k), of the rows' memory
 * units   none
 * throws  nothing
 * source  definition
 * cost    k² columns multiplications
 */
export function measureOrthogonality(rows: TallRows, k: number, scratch: Float64Array): number {
  rows.products(0, k, 0, k, scratch);
  let worst = 0;
  for (let i = 0; i < k; i++) {
    for (let j = 0; j < k; j++) worst = Math.max(worst, Math.abs(scratch[i * k + j] - (i === j ? 1 : 0)));
  }
  return worst;
}

/**
 * Makes the first k rows orthonormal, the first ones changed least: V ← L⁻¹ V with V V' = L L'. Done twice, since one pass
 * leaves what its factor was off by.
 *
 * shapes  V the first k rows; scratch (k × k), of the rows' memory
 * units   none
 * throws  TrainError 'fit' if the rows have become dependent
 * source  Cholesky QR, twice: Yamamoto, Nakatsukasa, Yanagisawa & Fukaya, Electronic Transactions on Numerical Analysis 44
 *         (2015)
 * cost    4 k² columns multiplications
 */
export function orthonormaliseRows(rows: TallRows, k: number, scratch: Float64Array): void {
  for (let pass = 0; pass < 2; pass++) {
    rows.products(0, k, 0, k, scratch);
    scratch.set(inverseLower(cholesky(scratch, k), k));
    rows.combine(scratch, k, k);
  }
}

function inverseLower(l: Float64Array, k: number): Float64Array {
  const inverse = new Float64Array(k * k);
  for (let j = 0; j < k; j++) {
    inverse[j * k + j] = 1 / l[j * k + j];
    for (let i = j + 1; i < k; i++) {
      let sum = 0;
      for (let c = j; c < i; c++) sum += l[i * k + c] * inverse[c * k + j];
      inverse[i * k + j] = -sum / l[i * k + i];
    }
  }
  return inverse;
}
