/**
 * Wild readings: spells in which a signal jumps away and back as it does nowhere else. A handful of them would outweigh
 * all others in sums of squares, so learning and calibrating treat them as missing. Spells no longer than the filter's
 * guard passes over count however many there are; longer ones only while they are few, since what recurs is the plant's
 * own doing. A jump that stays, however large, is a step and is kept. The judge sees every reading as it came.
 */
import { quantiles } from '../history/order-statistics.ts';
import type { Series } from '../history/series.ts';
import { REJECT_MOST_TICKS, REJECT_SD, robustScale } from '../judge/robust-scale.ts';
import type { PartEnds } from './fill.ts';

/** A spell of wild readings, ticks from the start of the series. */
export interface Excursion {
  readonly channel: number;
  readonly fromIndex: number;
  readonly toIndex: number;
}

/** Stretches of the learning part that are asked for their largest jump; half of them must know none nearly as large. */
const STRETCHES = 16;
/** Times the median stretch's largest jump. */
const BEYOND_USUAL = 3;
/** Longer spells up to the end of a part: more than these are the plant's own. */
const MOST_LONG_SPELLS = 2;
/** Share of a part's ticks that may be taken for wild; where it is more, the signal is like that. */
const MOST_SHARE = 0.05;
/** What is left of the way away when the spell is over, at most. */
const WAY_BACK = 0.5;

/**
 * Finds the spells of all signals; inputs are commands, whose jumps are real.
 *
 * shapes  steps (nc) lattice steps; result by channel and time; a spell never reaches over the end of a part
 * units   readings in the signals' units; `reach` ticks within which jumps belong together
 * throws  nothing
 * source  robust standard deviation as for the guard: Hampel, J. American Statistical Association 69 (1974)
 * cost    O(ny T)
 */
export function findExcursions(series: Series, steps: readonly number[], reach: number, ends: PartEnds): Excursion[] {
  const edges = [0, ends.learnTicks, ends.calibrateEnd, series.ticks];
  return series.values.slice(0, series.signalCount).flatMap((y, channel) => {
    const jumps = jumpsOf(y);
    const limit = jumpLimit(jumps.subarray(0, ends.learnTicks), steps[channel]);
    let long = 0;
    return edges.slice(1).flatMap((end, part) => {
      const spells = spellsIn(y, jumps, limit, edges[part], end, reach);
      // Of the parts before as well, never of those to come.
      long += spells.filter(([from, to]) => to - from > REJECT_MOST_TICKS).length;
      const wild = spells.filter(([from, to]) => long <= MOST_LONG_SPELLS || to - from <= REJECT_MOST_TICKS);
      if (wild.reduce((sum, [from, to]) => sum + to - from, 0) > MOST_SHARE * (end - edges[part])) return [];
      return wild.map(([fromIndex, toIndex]) => ({ channel, fromIndex, toIndex }));
    });
  });
}

/**
 * The series with those readings missing.
 *
 * shapes  as the series
 * units   as the series
 * throws  nothing
 * source  none
 * cost    one copy of what changes
 */
export function withoutExcursions(series: Series, excursions: readonly Excursion[]): Series {
  if (excursions.length === 0) return series;
  const values = series.values.map((y, c) => {
    const own = excursions.filter(({ channel }) => channel === c);
    if (own.length === 0) return y;
    const calm = y.slice();
    for (const { fromIndex, toIndex } of own) calm.fill(Number.NaN, fromIndex, toIndex);
    return calm;
  });
  return { ...series, values };
}

/** (ticks) size of the change since the last reading, per square root of the ticks between; NaN where there is none. */
function jumpsOf(y: Float64Array): Float64Array {
  const out = new Float64Array(y.length).fill(Number.NaN);
  let last = -1;
  for (let t = 0; t < y.length; t++) {
    if (Number.isNaN(y[t])) continue;
    if (last >= 0) out[t] = Math.abs(y[t] - y[last]) / Math.sqrt(t - last);
    last = t;
  }
  return out;
}

function jumpLimit(jumps: Float64Array, step: number): number {
  const largest = new Float64Array(STRETCHES);
  for (let s = 0; s < STRETCHES; s++) {
    const from = Math.floor((s * jumps.length) / STRETCHES);
    const to = Math.floor(((s + 1) * jumps.length) / STRETCHES);
    for (let t = from; t < to; t++) if (jumps[t] > largest[s]) largest[s] = jumps[t];
  }
  const usual = quantiles(largest, [0.5])[0];
  return Math.max(REJECT_SD * robustScale(jumps, step), BEYOND_USUAL * usual);
}

/** Spells from..to-1 of a part: jumps near each other that lead away from where the signal was, and back. */
function spellsIn(
  y: Float64Array,
  jumps: Float64Array,
  limit: number,
  from: number,
  to: number,
  reach: number,
): (readonly [number, number])[] {
  const spells: (readonly [number, number])[] = [];
  for (let t = from + 1; t < to; t++) {
    if (!(jumps[t] > limit)) continue;
    let last = t;
    for (let k = t + 1; k < to && k - last <= reach; k++) if (jumps[k] > limit) last = k;
    if (last > t && comesBack(y, t, last)) spells.push([t, last]);
    t = last;
  }
  return spells;
}

function comesBack(y: Float64Array, first: number, last: number): boolean {
  let before = first - 1;
  while (before >= 0 && Number.isNaN(y[before])) before--;
  let furthest = 0;
  for (let t = first; t < last; t++) furthest = Math.max(furthest, Math.abs(y[t] - y[before]) || 0);
  return Math.abs(y[last] - y[before]) <= WAY_BACK * furthest;
}
