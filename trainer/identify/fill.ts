/**
 * A complete, standardised copy of the history for learning. Readings that are not believed count as missing. Short gaps
 * are bridged by a straight line; long ones by the seasonal mean led in and out by what the ends differ from it, and the
 * origins that would look into a long gap are left out of the moments. Only for learning: the judge replays the readings
 * as they came, gaps and all, through the filter itself.
 */
import type { Series } from '../history/series.ts';
import type { Scaling } from './scaling.ts';

/** The completed history. */
export interface Filled {
  /** (nc) of (ticks), standardised, no gaps. */
  readonly values: readonly Float64Array[];
  /** (nc) of (ticks): 1 where a reading stood. */
  readonly isRead: readonly Uint8Array[];
  /** (ticks): LONG_GAP where a signal is inside a long gap, EXCLUDED where the time must not teach, else 0. */
  readonly inLongGap: Uint8Array;
}

/** Mark of `inLongGap`: learned from only where too little else is left. */
export const LONG_GAP = 1;
/** Mark of `inLongGap`: never learned from. */
export const EXCLUDED = 2;

/** Where the parts of a history end, in ticks from its start: what lies beyond one must not show before it. */
export interface PartEnds {
  readonly learnTicks: number;
  readonly calibrateEnd: number;
}

/**
 * Completes the history. Seasonal means come from the learning part alone, and a gap that reaches over the end of a part
 * is led on from its left end only, so that no part is completed from readings of a later one.
 *
 * shapes  scalings (nc); longGapTicks the shortest gap that counts as long
 * units   result standardised
 * throws  nothing
 * source  none
 * cost    O(nc T)
 */
export function fillHistory(
  series: Series,
  scalings: readonly Scaling[],
  period: number,
  longGapTicks: number,
  ends: PartEnds,
): Filled {
  const inLongGap = new Uint8Array(series.ticks);
  const isRead: Uint8Array[] = [];
  const values = series.values.map((y, c) => {
    const { mean, scale, clipLow, clipHigh } = scalings[c];
    const read = new Uint8Array(series.ticks);
    const z = new Float64Array(series.ticks);
    for (let t = 0; t < series.ticks; t++) {
      if (!(y[t] >= clipLow && y[t] <= clipHigh)) continue;
      read[t] = 1;
      z[t] = (y[t] - mean) / scale;
    }
    isRead.push(read);
    fillGaps(z, read, period, longGapTicks, ends, c < series.signalCount ? inLongGap : null);
    return z;
  });
  series.excluded?.isExcluded.forEach((flag, t) => {
    if (flag === 1) inLongGap[t] = EXCLUDED;
  });
  return { values, isRead, inLongGap };
}

function fillGaps(
  z: Float64Array,
  read: Uint8Array,
  period: number,
  longGapTicks: number,
  { learnTicks, calibrateEnd }: PartEnds,
  inLongGap: Uint8Array | null,
): void {
  let profile: Float64Array | null = null;
  for (let t = 0; t < z.length; t++) {
    if (read[t] === 1) continue;
    let end = t;
    while (end < z.length && read[end] === 0) end++;
    const isLong = end - t >= longGapTicks;
    if (isLong) {
      profile ??= phaseMeans(z.subarray(0, learnTicks), read, period);
      inLongGap?.fill(LONG_GAP, t, end);
    }
    const isAcross = (t < learnTicks && end >= learnTicks) || (t < calibrateEnd && end >= calibrateEnd);
    bridge(z, t, end, isLong ? profile : null, !isAcross && end < z.length);
    t = end;
  }
}

/** Fills t = from..to-1 from its two ends, or the one there is or may be looked at. */
function bridge(z: Float64Array, from: number, to: number, profile: Float64Array | null, hasRight: boolean): void {
  const season = (t: number): number => (profile === null ? 0 : profile[t % profile.length]);
  const hasLeft = from > 0;
  const right = hasRight ? z[to] - season(to) : 0;
  const left = hasLeft ? z[from - 1] - season(from - 1) : right;
  const end = hasRight ? right : left;
  for (let t = from; t < to; t++) {
    const share = (t - from + 1) / (to - from + 1);
    z[t] = season(t) + left + share * (end - left);
  }
}

/** Mean of what was read at each phase; zero where nothing was. */
function phaseMeans(z: Float64Array, read: Uint8Array, period: number): Float64Array {
  const phases = Math.max(1, period);
  const sum = new Float64Array(phases);
  const count = new Float64Array(phases);
  for (let t = 0; t < z.length; t++) {
    if (read[t] === 0) continue;
    sum[t % phases] += z[t];
    count[t % phases]++;
  }
  return sum.map((value, k) => (count[k] > 0 ? value / count[k] : 0));
}
