/**
 * Signals that say nothing: constant throughout, nearly so, or stuck at one value for a stretch far longer than is usual
 * for them.
 */
import { counted, type Finding, figure, iso, lengthOf, percent } from './finding.ts';
import type { Series } from './series.ts';

/** One value for this share of the readings leaves nothing to learn from. */
const NEAR_CONSTANT = 0.995;
/** A value a signal rests at (a pump that is off, rain that does not fall) is not a fault however long it lasts. */
const RESTING = 0.2;
const FEWEST_TICKS = 30;
const TIMES_USUAL = 8;

interface Run {
  readonly at: number;
  readonly length: number;
  readonly value: number;
}

/** Runs of one value, missing ticks inside passed over. */
function runsOf(values: Float64Array): Run[] {
  const runs: Run[] = [];
  let at = -1;
  let last = -1;
  for (let n = 0; n < values.length; n++) {
    const value = values[n] as number;
    if (Number.isNaN(value)) continue;
    if (at >= 0 && value === values[at]) {
      last = n;
      continue;
    }
    if (at >= 0) runs.push({ at, length: last - at + 1, value: values[at] as number });
    at = n;
    last = n;
  }
  if (at >= 0) runs.push({ at, length: last - at + 1, value: values[at] as number });
  return runs;
}

function sharesOf(values: Float64Array): { readings: number; shares: ReadonlyMap<number, number> } {
  const counts = new Map<number, number>();
  let readings = 0;
  for (const value of values) {
    if (Number.isNaN(value)) continue;
    readings++;
    counts.set(value, (counts.get(value) ?? 0) + 1);
  }
  for (const [value, count] of counts) counts.set(value, count / readings);
  return { readings, shares: counts };
}

/** Largest share of the readings that one value has; NaN where there is none. */
export function commonest(values: Float64Array): { readonly value: number; readonly share: number } {
  let best = { value: Number.NaN, share: Number.NaN };
  for (const [value, share] of sharesOf(values).shares) if (!(share <= best.share)) best = { value, share };
  return best;
}

function stuckFinding(series: Series, name: string, runs: readonly Run[], usual: number): Finding {
  const longest = runs.reduce((a, b) => (b.length > a.length ? b : a));
  const from = (series.firstTick + longest.at) * series.tickMs;
  const to = from + longest.length * series.tickMs;
  return {
    kind: 'stuck',
    weight: 'look',
    signal: name,
    from: iso(from),
    to: iso(to),
    count: runs.length,
    sentence: `${name} stands still ${counted(runs.length, 'time')} for far longer than usual (${counted(usual, 'tick')}); the longest is ${lengthOf(to - from)} at ${figure(longest.value)} from ${iso(from)}.`,
    advice: 'A sensor or a link that hangs repeats its last value: empty those readings if so.',
  };
}

/** What one signal says of itself. */
export function stuckFindings(series: Series, channel: number): Finding[] {
  const values = series.values[channel] as Float64Array;
  const name = series.names[channel] as string;
  const { readings, shares } = sharesOf(values);
  const whole = {
    signal: name,
    from: iso(series.firstTick * series.tickMs),
    to: iso((series.firstTick + series.ticks) * series.tickMs),
  };
  if (readings === 0) return [];
  const most = commonest(values);
  if (shares.size === 1)
    return [
      {
        kind: 'constant',
        weight: 'serious',
        ...whole,
        count: readings,
        sentence: `${name} is ${figure(most.value)} in all ${counted(readings, 'reading')}: there is nothing to learn from.`,
        advice: 'Check the sensor; leave the signal out of the site file if it is right.',
      },
    ];
  if (most.share >= NEAR_CONSTANT)
    return [
      {
        kind: 'near-constant',
        weight: 'look',
        ...whole,
        count: Math.round((1 - most.share) * readings),
        sentence: `${name} is ${figure(most.value)} in ${percent(most.share)} of its readings; only ${counted(Math.round((1 - most.share) * readings), 'reading')} differ.`,
        advice: 'Check the sensor; a signal that hardly moves is hard to score and seldom worth a forecast.',
      },
    ];
  const runs = runsOf(values).filter(
    (run) => (shares.get(run.value) as number) < RESTING || run.length >= values.length / 4,
  );
  const lengths = Float64Array.from(runs, (run) => run.length).sort();
  const usual = lengths[Math.floor(0.99 * (lengths.length - 1))] ?? 1;
  const long = runs.filter((run) => run.length >= Math.max(FEWEST_TICKS, TIMES_USUAL * usual));
  return long.length > 0 ? [stuckFinding(series, name, long, usual)] : [];
}
