/**
 * The logistic function from a table, since Math.exp may differ between machines in its last bit: values at steps of 1/8
 * from 0 to 20, worked out once from e^(1/8) by repeated products, cubic (four-point Lagrange) interpolation between;
 * largest absolute error 3e-6, tested. Good for the chance of a switch; not for odds below one in ten million.
 */

const STEPS_PER_UNIT = 8;
const LAST = 160;
/** e^(1/8), rounded to the nearest float64. */
const ROOT = 1.1331484530668263;

/** (LAST + 3) logistic((k − 1) / 8), k = 0 … */
const table = logisticTable();

function logisticTable(): Float64Array {
  const out = new Float64Array(LAST + 3);
  let odds = 1;
  for (let k = 1; k < out.length; k++) {
    out[k] = odds / (1 + odds);
    odds *= ROOT;
  }
  out[0] = 1 - out[2];
  return out;
}

/**
 * 1 / (1 + e^−x).
 *
 * throws  nothing; NaN gives NaN; 0 and 1 from −20 and 20 on
 * source  Lagrange's four-point formula, Abramowitz and Stegun (1964) 25.2.13
 * cost    O(1); allocates nothing
 */
export function logistic(x: number): number {
  const most = LAST / STEPS_PER_UNIT;
  if (x <= -most) return 0;
  if (x >= most) return 1;
  const a = x < 0 ? -x : x;
  const at = a * STEPS_PER_UNIT;
  const k = Math.floor(at);
  const p = at - k;
  const right =
    (-p * (p - 1) * (p - 2) * table[k]) / 6 +
    ((p * p - 1) * (p - 2) * table[k + 1]) / 2 -
    (p * (p + 1) * (p - 2) * table[k + 2]) / 2 +
    (p * (p * p - 1) * table[k + 3]) / 6;
  return x < 0 ? 1 - right : right;
}
