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

/** Runs of equal readings in order of time. */
interface Runs {
  readonly count: number;
  /** (count or more) */
  readonly values: Float64Array;
  readonly lengths: Int32Array;
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

function runsOf(y: Float64Array): Runs {
  const values = new Float64Array(y.length);
  const lengths = new Int32Array(y.length);
  let count = 0;
  eachRun(y, (value, _from, _to, length) => {
    values[count] = value;
    lengths[count++] = length;
  });
  return { count, values, lengths };
}

/** The runs that last at least so long, at values other than some. */
function without({ count, values, lengths }: Runs, rests: readonly number[], least: number): Runs {
  const left = { values: new Float64Array(count), lengths: new Int32Array(count) };
  let kept = 0;
  for (let k = 0; k < count; k++) {
    if (lengths[k] < least || (rests.length > 0 && rests.includes(values[k]))) continue;
    left.values[kept] = values[k];
    left.lengths[kept++] = lengths[k];
  }
  return { count: kept, ...left };
}

function readingsIn({ count, lengths }: Runs): number {
  let sum = 0;
  for (let k = 0; k < count; k++) sum += lengths[k];
  return sum;
}

const OFF = { ticks: 0, rests: [] as readonly number[] };

function guardOf(runs: Runs, learnTicks: number): { ticks: number; rests: readonly number[] } {
  const readings = readingsIn(runs);
  let rests: readonly number[] = [];
  // Values rested at are known by the guard's length, and the guard's length by what is left without them.
  for (let round = 0; round < 3; round++) {
    const left = rests.length === 0 ? runs : without(runs, rests, 0);
    const ticks = lengthOf(left);
    if (ticks === 0 || ticks > Math.min(MOST_TICKS, MOST_SHARE * learnTicks)) return OFF;
    const long = without(left, [], ticks);
    const again = valuesSeenTwice(long);
    if (again.length === 0) return readingsIn(long) > MOST_LOST * readings ? OFF : { ticks, rests };
    rests = [...rests, ...again];
    if (rests.length > MOST_RESTS) return OFF;
  }
  return OFF;
}

/** Length that runs dying out at the slowest rate seen would reach `EXPECTED` times; 0 where they do not die out. */
function lengthOf({ count, lengths }: Runs): number {
  let longest = 0;
  for (let k = 0; k < count; k++) if (lengths[k] > longest) longest = lengths[k];
  const atLeast = new Float64Array(longest + 2);
  for (let k = 0; k < count; k++) atLeast[lengths[k]]++;
  for (let k = longest; k >= 0; k--) atLeast[k] += atLeast[k + 1];
  if (!(atLeast[1] >= FEWEST_RUNS)) return 0;
  let rate = 0;
  let k = 1;
  for (; k <= longest && atLeast[k] >= FEWEST_RUNS; k++) rate = Math.max(rate, atLeast[k + 1] / atLeast[k]);
  if (rate >= 1) return 0;
  const further = rate > 0 ? Math.log(EXPECTED / Math.max(1, atLeast[k])) / Math.log(rate) : 0;
  return Math.max(SHORTEST, k + Math.ceil(further));
}

function valuesSeenTwice({ count, values }: Runs): number[] {
  const seen = new Set<number>();
  const twice = new Set<number>();
  for (let k = 0; k < count; k++) {
    if (seen.has(values[k])) twice.add(values[k]);
    seen.add(values[k]);
  }
  return [...twice];
}
