/**
 * Cosines from a table, since Math.cos may differ between machines in its last bits. Angles are counted in turns, so that
 * bringing one into the first turn is exact. The table holds cosine and sine at 256 points of the turn, made at start-up by
 * half-angle formulas and rotations (+ − × ÷ √ alone); between them Taylor's series about the nearest point:
 *
 *   cos(a + e) = cos a (1 − e²/2 + e⁴/24) − sin a (e − e³/6),   |e| ≤ π/256
 *
 * The first term left out is sin a · e⁵/120: the error is below 2.4e-12, plus rounding.
 */

const POINTS = 256;
const TURN = 6.283185307179586;
const { cosines: COS, sines: SIN } = makeTable();

function makeTable(): { readonly cosines: Float64Array; readonly sines: Float64Array } {
  const cosines = new Float64Array(POINTS).fill(1);
  const sines = new Float64Array(POINTS);
  // Half a turn, halved on: cos(a/2) = √((1 + cos a)/2), sin(a/2) = sin a / (2 cos(a/2)); from a quarter on, no 0 / 0.
  let cos = -1;
  let sin = 0;
  for (let bit = POINTS / 2; bit >= 1; bit /= 2) {
    if (bit === POINTS / 4) {
      cos = 0;
      sin = 1;
    } else if (bit < POINTS / 4) {
      cos = Math.sqrt((1 + cos) / 2);
      sin = sin / (2 * cos);
    }
    for (let k = 0; k < POINTS; k++) {
      if ((k & bit) === 0) continue;
      const c = cosines[k];
      cosines[k] = c * cos - sines[k] * sin;
      sines[k] = sines[k] * cos + c * sin;
    }
  }
  return { cosines, sines };
}

/**
 * Replaces `count` angles by their cosines, in place.
 *
 * shapes  angles, `count` numbers from the start
 * units   turns; up to 2^40 in size the fraction of a turn keeps three decimal places and more
 * throws  nothing; what is not finite gives NaN
 * source  Taylor's series, file head
 * cost    O(count); allocates nothing
 */
export function cosinesOf(angles: Float64Array, count: number): void {
  for (let j = 0; j < count; j++) {
    const points = (angles[j] - Math.floor(angles[j])) * POINTS;
    const nearest = Math.floor(points + 0.5);
    const e = ((points - nearest) * TURN) / POINTS;
    const square = e * e;
    const k = nearest & (POINTS - 1);
    angles[j] = COS[k] * (1 - square * (0.5 - square / 24)) - SIN[k] * e * (1 - square / 6);
  }
}
