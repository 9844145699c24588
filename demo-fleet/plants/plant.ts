/**
 * What every simulated plant offers: it is advanced tick by tick and shows its true values, which the sensors then spoil.
 */

/** A plant in motion. `values` is the plant's own buffer, overwritten by every step; order is the site's channels. */
export interface Plant {
  /** True values at the end of the last step, in the channels' units. */
  readonly values: Float64Array;
  /** Advances by one tick that begins at `fromMs` (ms since 1970, UTC). */
  step(fromMs: number): void;
  /** Sets how worn the plant is: 0 as built, 1 at the end of its life; what wears is the plant's own matter. */
  wear(share: number): void;
}

/** Hours of the local day in [0, 24), for the plant's daily patterns. */
export function hourOfDay(timeMs: number, utcOffsetHours: number): number {
  return (((timeMs / 3_600_000 + utcOffsetHours) % 24) + 24) % 24;
}

/** 0 Monday … 6 Sunday, local. The first of January 1970 was a Thursday. */
export function dayOfWeek(timeMs: number, utcOffsetHours: number): number {
  return (((Math.floor((timeMs / 3_600_000 + utcOffsetHours) / 24) + 3) % 7) + 7) % 7;
}
