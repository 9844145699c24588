/**
 * Signals that say nothing: constant throughout, nearly so, or stuck at one value for a stretch far longer than is usual
 * for them.
 */
import { counted, type Finding, figure, iso, lengthOf, percent } from './finding.ts';
import { GrowingList } from './growing.ts';
import { quantiles } from './order-statistics.ts';
import type { Series } from './series.ts';
import type { ValuesSeen } from './values-seen.ts';

/** One value for this share of the readings leaves nothing to learn from. */
export const NEAR_CONSTANT = 0.995;
const FEWEST_TICKS = 30;
const TIMES_USUAL = 8;

/** Runs of one value, missing ticks inside passed over. */
interface Runs {
  readonly starts: Float64Array;
  readonly lengths: Float64Array;
}

/** Share of a resting value's readings that one run must hold to be a stuck sensor after all. */
const ALL_AT_ONCE = 0.9;

/** Runs of values; those of a `resting` value only where nearly all of its readings are in one. */
function runsOf(values: Float64Array, resting: ValuesSeen['resting']): Runs {
  const starts = new GrowingList();
  const lengths = new GrowingList();
  const close = (at: number, length: number): void => {
    if (at < 0) return;
    if (resting.length > 0) {
      const rest = resting.find(({ value }) => value === values[at]);
      if (rest !== undefined && length < ALL_AT_ONCE * rest.count) return;
    }
    starts.push(at);
    lengths.push(length);
  };
  let at = -1;
  let last = -1;
  for (let n = 0; n < values.length; n++) {
    const value = values[n] as number;
    if (Number.isNaN(value)) continue;
    if (at < 0 || value !== values[at]) {
      close(at, last - at + 1);
      at = n;
    }
    last = n;
  }
  close(at, last - at + 1);
  return { starts: starts.take(), lengths: lengths.take() };
}

/** Runs of this length are far longer than is usual among those. */
function leastStuck(lengths: Float64Array): { readonly usual: number; readonly least: number } {
  const usual = quantiles(lengths, [0.99])[0] as number;
  return { usual, least: Math.max(FEWEST_TICKS, TIMES_USUAL * usual) };
}

/** A stretch in which one signal stands still for far longer than usual; ticks fromIndex <= t < toIndex. */
export interface StuckStretch {
  readonly channel: number;
  readonly fromIndex: number;
  readonly toIndex: number;
  readonly value: number;
}

/** All such stretches of a signal that otherwise moves, in order of time. */
export function stuckStretches(series: Series, channel: number, seen: ValuesSeen): StuckStretch[] {
  if (seen.readings === 0 || !(seen.commonestShare < NEAR_CONSTANT)) return [];
  const values = series.values[channel] as Float64Array;
  const { starts, lengths } = runsOf(values, seen.resting);
  if (lengths.length === 0) return [];
  const { least } = leastStuck(lengths);
  const stretches: StuckStretch[] = [];
  for (let k = 0; k < starts.length; k++) {
    const at = starts[k] as number;
    const length = lengths[k] as number;
    if (length >= least) stretches.push({ channel, fromIndex: at, toIndex: at + length, value: values[at] as number });
  }
  return stretches;
}

function stuckFinding(series: Series, channel: number, { starts, lengths }: Runs): Finding | null {
  const { usual, least } = leastStuck(lengths);
  const count = lengths.reduce((sum, length) => sum + (length >= least ? 1 : 0), 0);
  if (count === 0) return null;
  const longest = lengths.indexOf(lengths.reduce((a, b) => Math.max(a, b)));
  const at = starts[longest] as number;
  const name = series.names[channel] as string;
  const from = (series.firstTick + at) * series.tickMs;
  const to = from + (lengths[longest] as number) * series.tickMs;
  const value = (series.values[channel] as Float64Array)[at] as number;
  return {
    kind: 'stuck',
    weight: 'look',
    signal: name,
    from: iso(from),
    to: iso(to),
    count,
    sentence: `${name} stands still ${counted(count, 'time')} for far longer than usual (${counted(usual, 'tick')}); the longest is ${lengthOf(to - from)} at ${figure(value)} from ${iso(from)}.`,
    advice: 'A sensor or a link that hangs repeats its last value: exclude those readings if so.',
  };
}

/** What one signal says of itself. */
export function stuckFindings(series: Series, channel: number, seen: ValuesSeen): Finding[] {
  const name = series.names[channel] as string;
  const whole = {
    signal: name,
    from: iso(series.firstTick * series.tickMs),
    to: iso((series.firstTick + series.ticks) * series.tickMs),
  };
  if (seen.readings === 0) return [];
  if (seen.distinct === 1)
    return [
      {
        kind: 'constant',
        weight: 'serious',
        ...whole,
        count: seen.readings,
        sentence: `${name} is ${figure(seen.commonest)} in all ${counted(seen.readings, 'reading')}: there is nothing to learn from.`,
        advice: 'Check the sensor; leave the signal out of the site file if it is right.',
      },
    ];
  if (seen.commonestShare >= NEAR_CONSTANT) {
    const others = Math.round((1 - seen.commonestShare) * seen.readings);
    return [
      {
        kind: 'near-constant',
        weight: 'look',
        ...whole,
        count: others,
        sentence: `${name} is ${figure(seen.commonest)} in ${percent(seen.commonestShare)} of its readings; only ${counted(others, 'reading')} differ.`,
        advice: 'Check the sensor; a signal that hardly moves is hard to score and seldom worth a forecast.',
      },
    ];
  }
  const runs = runsOf(series.values[channel] as Float64Array, seen.resting);
  const stuck = runs.lengths.length === 0 ? null : stuckFinding(series, channel, runs);
  return stuck === null ? [] : [stuck];
}
