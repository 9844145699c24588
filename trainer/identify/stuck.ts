/**
 * How long a signal repeats one reading by nature, so that the filter can tell a sensor that hangs. Noise makes runs of
 * equal readings die out geometrically; their rate is taken where runs are many, and carried on to the length that such a
 * signal would reach once in a hundred histories. Runs at values that a signal comes back to and rests at do not count, and
 * may last for ever. What hung in the history is learned from all the same: the record's own readings are what it is
 * judged by, and left out they were missed more than they misled, where both were measured.
 */
import type { StuckGuard } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';

/** Runs of a length that a rate is taken from, at least. */
const FEWEST_RUNS = 20;
/** Runs by nature as long as the guard's that are expected in a history. */
const EXPECTED = 0.01;
const SHORTEST = 4;
/** A guard that needs a longer share of the learning part than this would tell nothing in time. */
const MOST_SHARE = 0.02;
/** A signal that would lose more of its readings than this share is like that. */
const MOST_LOST = 0.1;
const MOST_RESTS = 8;
const MOST_TICKS = 65_535;

interface Run {
  readonly value: number;
  readonly length: number;
}

/**
 * The guard that a history's learning part asks for.
 *
 * shapes  ticks, rests (ny)
 * units   ticks; values in units of the signal
 * throws  nothing
 * source  own choice
 * cost    O(ny T)
 */
export function findStuck({ values, signalCount }: Series, learnTicks: number): Omit<StuckGuard, 'acts'> {
  const found = values.slice(0, signalCount).map((y) => guardOf(runsOf(y.subarray(0, learnTicks)), learnTicks));
  return {
    ticks: Int32Array.from(found, ({ ticks }) => ticks),
    rests: found.map(({ rests }) => Float64Array.from(rests)),
  };
}

/**
 * The series without the readings of sensors that hung, the first of each run kept.
 *
 * shapes  as the series
 * units   as the series
 * throws  nothing
 * source  none
 * cost    O(ny T)
 */
export function withoutStuck(series: Series, { ticks, rests }: Omit<StuckGuard, 'acts'>): Series {
  const values = series.values.map((y, c) => {
    if (c >= series.signalCount || ticks[c] === 0) return y;
    const out = y.slice();
    eachRun(y, (value, from, to, length) => {
      if (length >= ticks[c] && !rests[c].includes(value)) out.fill(Number.NaN, from + 1, to);
    });
    return out;
  });
  return { ...series, values };
}

/** Runs of equal readings, missing ones passed over: value, first tick, tick after the last, readings. */
function eachRun(y: Float64Array, visit: (value: number, from: number, to: number, length: number) => void): void {
  let from = -1;
  let last = -1;
  let length = 0;
  for (let t = 0; t < y.length; t++) {
    const value = y[t];
    if (Number.isNaN(value)) continue;
    if (from < 0 || value !== y[from]) {
      if (from >= 0) visit(y[from], from, last + 1, length);
      from = t;
      length = 0;
    }
    last = t;
    length++;
  }
  if (from >= 0) visit(y[from], from, last + 1, length);
}

function runsOf(y: Float64Array): Run[] {
  const runs: Run[] = [];
  eachRun(y, (value, _from, _to, length) => {
    runs.push({ value, length });
  });
  return runs;
}

const OFF = { ticks: 0, rests: [] as readonly number[] };

function guardOf(runs: readonly Run[], learnTicks: number): { ticks: number; rests: readonly number[] } {
  const readings = runs.reduce((sum, { length }) => sum + length, 0);
  let rests: readonly number[] = [];
  // Values rested at are known by the guard's length, and the guard's length by what is left without them.
  for (let round = 0; round < 3; round++) {
    const left = runs.filter(({ value }) => !rests.includes(value));
    const ticks = lengthOf(left);
    if (ticks === 0 || ticks > Math.min(MOST_TICKS, MOST_SHARE * learnTicks)) return OFF;
    const long = left.filter(({ length }) => length >= ticks);
    const again = valuesSeenTwice(long);
    if (again.length === 0) {
      const lost = long.reduce((sum, { length }) => sum + length, 0);
      return lost > MOST_LOST * readings ? OFF : { ticks, rests };
    }
    rests = [...rests, ...again];
    if (rests.length > MOST_RESTS) return OFF;
  }
  return OFF;
}

/** Length that runs dying out at the slowest rate seen would reach `EXPECTED` times; 0 where they do not die out. */
function lengthOf(runs: readonly Run[]): number {
  const longest = runs.reduce((most, { length }) => Math.max(most, length), 0);
  const atLeast = new Float64Array(longest + 2);
  for (const { length } of runs) atLeast[length]++;
  for (let k = longest; k >= 0; k--) atLeast[k] += atLeast[k + 1];
  if (!(atLeast[1] >= FEWEST_RUNS)) return 0;
  let rate = 0;
  let k = 1;
  for (; k <= longest && atLeast[k] >= FEWEST_RUNS; k++) rate = Math.max(rate, atLeast[k + 1] / atLeast[k]);
  if (rate >= 1) return 0;
  const further = rate > 0 ? Math.log(EXPECTED / Math.max(1, atLeast[k])) / Math.log(rate) : 0;
  return Math.max(SHORTEST, k + Math.ceil(further));
}

function valuesSeenTwice(runs: readonly Run[]): number[] {
  const seen = new Set<number>();
  const twice = new Set<number>();
  for (const { value } of runs) {
    if (seen.has(value)) twice.add(value);
    seen.add(value);
  }
  return [...twice];
}
