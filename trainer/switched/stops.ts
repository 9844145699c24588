/**
 * Stops: values that a signal is held at by the plant itself, as a level by its overflow. Readings pile up there, which a
 * mere extreme does not do. A roll-out that knew nothing of them would let a flooded well rise for ever.
 */

/** Stops of one signal. */
export interface Stops {
  /** −∞ and +∞ where there is none. */
  readonly floor: number;
  readonly ceiling: number;
  /** Width of the pile. */
  readonly band: number;
}

/** Width of the band at an extreme, as a share of the range. */
const BAND_SHARE = 0.01;
/** Ticks in the band at least, and how many times as dense it is as the two bands beside it. */
const LEAST_TICKS = 12;
const PILE_RATIO = 6;

/**
 * Stops of a signal in the learning part.
 *
 * shapes  z, isRead (T)
 * units   standardised
 * throws  nothing
 * source  own choice; a parabola's top is 2.7 times as dense as the two bands below it
 * cost    O(T)
 */
export function findStops(z: Float64Array, isRead: Uint8Array): Stops {
  let low = Number.POSITIVE_INFINITY;
  let high = Number.NEGATIVE_INFINITY;
  for (let t = 0; t < z.length; t++) {
    if (isRead[t] === 0) continue;
    low = Math.min(low, z[t]);
    high = Math.max(high, z[t]);
  }
  const band = BAND_SHARE * (high - low);
  if (!(band > 0)) return { floor: Number.NEGATIVE_INFINITY, ceiling: Number.POSITIVE_INFINITY, band: 0 };
  return {
    floor: isPile(z, isRead, (value) => value - low, band) ? low + band / 2 : Number.NEGATIVE_INFINITY,
    ceiling: isPile(z, isRead, (value) => high - value, band) ? high - band / 2 : Number.POSITIVE_INFINITY,
    band,
  };
}

function isPile(z: Float64Array, isRead: Uint8Array, depthOf: (value: number) => number, band: number): boolean {
  let inside = 0;
  let beside = 0;
  for (let t = 0; t < z.length; t++) {
    if (isRead[t] === 0) continue;
    const depth = depthOf(z[t]);
    if (depth <= band) inside++;
    else if (depth <= 3 * band) beside++;
  }
  return inside >= LEAST_TICKS && inside > (PILE_RATIO * beside) / 2;
}
