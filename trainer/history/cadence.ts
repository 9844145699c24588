/**
 * How often a signal was read: the usual interval, how much it wavers, and the tick that suits it.
 */
import { counted, type Finding, lengthOf, percent } from './finding.ts';
import type { ChannelReadings } from './history.ts';
import { quantiles } from './order-statistics.ts';

const SECOND = 1000;
const MINUTE = 60 * SECOND;
const HOUR = 60 * MINUTE;
/** Steps people use; each divides a day, so that ticks fall alike on every day. */
const STEPS_MS = [
  ...[1, 2, 3, 5, 6, 10, 12, 15, 20, 30].map((n) => n * SECOND),
  ...[1, 2, 3, 5, 6, 10, 12, 15, 20, 30].map((n) => n * MINUTE),
  ...[1, 2, 3, 4, 6, 12, 24].map((n) => n * HOUR),
];
/** A usual interval this much below a step still counts as that step: clocks waver. */
const WAVER = 1.02;
/** Share of the intervals that must be multiples of the commonest one, and how far off one may be, in that interval. */
const MULTIPLES_SHARE = 0.8;
const MULTIPLE_OFF = 0.1;
/** Jitter beyond this share of the interval is worth a word. */
const JITTER_SHARE = 0.1;

/** Intervals between readings, ms; NaN where fewer than two readings exist. */
export interface Cadence {
  readonly intervalMs: number;
  /** Median absolute deviation of the intervals from the usual one. */
  readonly jitterMs: number;
}

/** Cadence of readings in order of time; readings without a value do not count. */
export function cadenceOf(channel: ChannelReadings, order: Uint32Array | null): Cadence {
  const intervals = new Float64Array(channel.times.length);
  let count = 0;
  let previous = Number.NaN;
  for (let n = 0; n < channel.times.length; n++) {
    const i = order === null ? n : (order[n] as number);
    if (Number.isNaN(channel.values[i])) continue;
    const time = channel.times[i] as number;
    if (time > previous) intervals[count++] = time - previous;
    previous = time;
  }
  const found = intervals.subarray(0, count);
  const intervalMs = usualInterval(found);
  for (let n = 0; n < count; n++) found[n] = Math.abs((found[n] as number) - intervalMs);
  return { intervalMs, jitterMs: quantiles(found, [0.5])[0] as number };
}

/**
 * The median, unless many readings are missing: then the median is a multiple of the true interval, which is still the
 * commonest one, and the others are multiples of it.
 */
function usualInterval(intervals: Float64Array): number {
  const median = quantiles(intervals, [0.5])[0] as number;
  const beat = commonest(intervals);
  if (!(median > beat * WAVER)) return median;
  const multiples = intervals.filter((interval) => isMultiple(interval / beat)).length;
  return multiples >= MULTIPLES_SHARE * intervals.length ? beat : median;
}

function isMultiple(ratio: number): boolean {
  const whole = Math.round(ratio);
  return whole >= 1 && Math.abs(ratio - whole) <= MULTIPLE_OFF;
}

/** Middle of the narrowest crowd of intervals: the most that lie within a wavering clock of each other. */
function commonest(intervals: Float64Array): number {
  const sorted = intervals.slice().sort();
  let best = Number.NaN;
  let most = 0;
  for (let from = 0, to = 0; from < sorted.length; from++) {
    while (to < sorted.length && (sorted[to] as number) <= (sorted[from] as number) * WAVER) to++;
    if (to - from <= most) continue;
    most = to - from;
    best = sorted[(from + to) >> 1] as number;
  }
  return best;
}

/** Tick for signals read at these usual intervals: the smallest step no signal is slower than. */
export function suggestTick(intervalsMs: readonly number[]): number {
  const slowest = Math.max(...intervalsMs.filter((interval) => interval > 0), SECOND);
  return STEPS_MS.find((step) => step * WAVER >= slowest) ?? (STEPS_MS.at(-1) as number);
}

/** Says that the site's tick suits no signal at all, being finer than any is read; null where one is read as often. */
export function tooFineTick(cadences: readonly Cadence[], tickMs: number): Finding | null {
  const intervals = cadences.map(({ intervalMs }) => intervalMs).filter((interval) => interval > 0);
  const quickest = Math.min(...intervals);
  if (intervals.length === 0 || !(quickest > tickMs * WAVER)) return null;
  return {
    kind: 'cadence',
    weight: 'serious',
    signal: null,
    from: null,
    to: null,
    count: Math.round(quickest / tickMs),
    sentence: `No signal is read more often than every ${lengthOf(quickest)}, but the tick is ${lengthOf(tickMs)}: ${percent(1 - tickMs / quickest)} of the ticks have no reading.`,
    advice: `Take a tick of ${lengthOf(suggestTick([quickest]))} in the site file, and as many fewer ticks for the horizon.`,
  };
}

/** Says where the site's tick does not suit a signal, or its clock wavers; `isTooFine`: that was said of all. */
export function cadenceFindings(name: string, cadence: Cadence, tickMs: number, isTooFine = false): Finding[] {
  const { intervalMs, jitterMs } = cadence;
  const whole = { kind: 'cadence', signal: name, from: null, to: null } as const;
  const found: Finding[] = [];
  if (intervalMs > tickMs * WAVER && !isTooFine)
    found.push({
      ...whole,
      weight: 'look',
      count: Math.round(intervalMs / tickMs),
      sentence: `${name} is read every ${lengthOf(intervalMs)}, more slowly than the tick of ${lengthOf(tickMs)}: most ticks have no reading.`,
      advice: `Take a tick of ${lengthOf(suggestTick([intervalMs]))} in the site file, or keep this signal out.`,
    });
  const perTick = Math.round(tickMs / intervalMs);
  if (intervalMs > 0 && perTick >= 2)
    found.push({
      ...whole,
      weight: 'note',
      count: perTick,
      sentence: `${name} is read every ${lengthOf(intervalMs)}: about ${counted(perTick, 'reading')} make one tick of ${lengthOf(tickMs)}.`,
      advice: 'Check that the aggregate of the signal in the site file is the one wanted.',
    });
  if (jitterMs > JITTER_SHARE * intervalMs)
    found.push({
      ...whole,
      weight: 'note',
      count: Math.round(jitterMs),
      sentence: `${name} comes irregularly: usually ${lengthOf(intervalMs)} apart, half of the intervals more than ${lengthOf(jitterMs)} off that.`,
      advice: 'Nothing to do if readings are sent on change; else look at the logger.',
    });
  return found;
}
