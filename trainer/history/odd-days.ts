/**
 * Days on which most signals of the plant were at once as on no other day: another level, another swing or another unrest
 * than in the weeks around. Maintenance and tests look like this, but so may a flood: a suggestion, never more.
 */
import { quantiles } from './order-statistics.ts';
import type { Series } from './series.ts';

/** Ticks fromIndex <= t < toIndex. */
export interface Stretch {
  readonly fromIndex: number;
  readonly toIndex: number;
}

const DAY_MS = 86_400_000;
/** A day of fewer ticks has no swing of its own; fewer days know no "usual". */
const LEAST_TICKS = 8;
const LEAST_DAYS = 30;
/** Days on either side that a day is held against. */
const AROUND = 14;
/** Robust standard deviations from the days around, and times what all but MOST_SHARE of the days keep to. */
const ODD_SD = 8;
const TIMES_KEPT = 2;
/** Where more of the days are odd, that is how the plant is. */
const MOST_SHARE = 0.05;
/** From the median absolute deviation to a standard deviation. */
const MAD_TO_SD = 1.4826;

/** Stretches of whole days (UTC), in order of time; none where the history is too short to tell. */
export function oddDays(series: Series): Stretch[] {
  const perDay = DAY_MS / series.tickMs;
  if (!Number.isInteger(perDay) || perDay < LEAST_TICKS) return [];
  const start = (perDay - (series.firstTick % perDay)) % perDay;
  const days = Math.floor((series.ticks - start) / perDay);
  if (days < LEAST_DAYS) return [];
  const signals = series.values.slice(0, series.signalCount);
  const odd = new Uint16Array(days);
  for (const y of signals) {
    const flags = oddOf(y, start, perDay, days);
    for (let d = 0; d < days; d++) odd[d] += flags[d] as number;
  }
  const needed = signals.length === 1 ? 1 : Math.max(2, Math.ceil(signals.length / 2));
  const isOdd = Array.from(odd, (count) => count >= needed);
  if (isOdd.filter(Boolean).length > MOST_SHARE * days) return [];
  const stretches: Stretch[] = [];
  for (let d = 0; d < days; d++) {
    if (!isOdd[d]) continue;
    const first = d;
    while (isOdd[d + 1]) d++;
    stretches.push({ fromIndex: start + first * perDay, toIndex: start + (d + 1) * perDay });
  }
  return stretches;
}

/** (days) 1 where a signal's level, swing or unrest is far from the days around. */
function oddOf(y: Float64Array, start: number, perDay: number, days: number): Uint8Array {
  const [level, swing, unrest] = [new Float64Array(days), new Float64Array(days), new Float64Array(days)];
  for (let d = 0; d < days; d++) {
    const day = y.subarray(start + d * perDay, start + (d + 1) * perDay);
    [level[d], swing[d], unrest[d]] = figuresOf(day) as [number, number, number];
  }
  const flags = new Uint8Array(days);
  for (const figures of [level, logarithms(swing), logarithms(unrest)]) {
    const away = awayFromAround(figures);
    const limit = Math.max(ODD_SD, TIMES_KEPT * (quantiles(away, [1 - MOST_SHARE])[0] as number));
    away.forEach((distance, d) => {
      if (distance > limit) flags[d] = 1;
    });
  }
  return flags;
}

/** Mean, standard deviation and mean change between ticks; NaN for a day mostly without readings. */
function figuresOf(day: Float64Array): readonly number[] {
  let [sum, squares, changes, count, pairs] = [0, 0, 0, 0, 0];
  day.forEach((value, t) => {
    if (Number.isNaN(value)) return;
    sum += value;
    count++;
    const change = t > 0 ? Math.abs(value - (day[t - 1] as number)) : Number.NaN;
    if (Number.isNaN(change)) return;
    changes += change;
    pairs++;
  });
  if (count < day.length / 2 || pairs === 0) return [Number.NaN, Number.NaN, Number.NaN];
  const mean = sum / count;
  for (const value of day) if (!Number.isNaN(value)) squares += (value - mean) * (value - mean);
  return [mean, Math.sqrt(squares / count), changes / pairs];
}

/** Ratios as differences, so that a tenth is as odd as ten times; a day at rest counts as a hundredth of the usual. */
function logarithms(sizes: Float64Array): Float64Array {
  const least = (quantiles(sizes, [0.5])[0] as number) / 100;
  return sizes.map((size) => Math.log(Math.max(size, least)));
}

/** Distance of each day from the median of the days around it, in robust standard deviations of that distance. */
function awayFromAround(figures: Float64Array): Float64Array {
  const away = figures.map((figure, d) => {
    const around = figures.slice(Math.max(0, d - AROUND), d + AROUND + 1);
    return Math.abs(figure - (quantiles(around, [0.5])[0] as number));
  });
  const usual = MAD_TO_SD * (quantiles(away, [0.5])[0] as number);
  return usual > 0 ? away.map((distance) => distance / usual) : new Float64Array(figures.length);
}
