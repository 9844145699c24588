/**
 * Readings that cannot be: outside the declared range, absurdly far from all others, or single spikes.
 */
import type { Signal } from '@stillwell/protocol';
import { counted, type Finding, figure, iso } from './finding.ts';
import type { ChannelReadings } from './history.ts';
import { quantiles } from './order-statistics.ts';
import { plausibleSpan } from './plausible.ts';
import type { Series } from './series.ts';

/** Times the largest usual step (99.9 % of all) that a jump away and back must exceed. */
const SPIKE_TIMES = 6;
const FEWEST = 200;

interface Outside {
  count: number;
  firstMs: number;
  lastMs: number;
  worst: number;
}

/** Readings left out because they are outside the plausible span. */
export function outsideFindings(signal: Signal, channel: ChannelReadings): Finding[] {
  const { low, high, isDeclared } = plausibleSpan(signal, channel.values);
  const middle = (low + high) / 2;
  const out: Outside = { count: 0, firstMs: Number.POSITIVE_INFINITY, lastMs: Number.NEGATIVE_INFINITY, worst: middle };
  for (let i = 0; i < channel.values.length; i++) {
    const value = channel.values[i] as number;
    if (Number.isNaN(value) || (value >= low && value <= high)) continue;
    out.count++;
    out.firstMs = Math.min(out.firstMs, channel.times[i] as number);
    out.lastMs = Math.max(out.lastMs, channel.times[i] as number);
    if (Math.abs(value - middle) > Math.abs(out.worst - middle)) out.worst = value;
  }
  if (out.count === 0) return [];
  const span = `${figure(low)} to ${figure(high)}`;
  return [
    {
      kind: isDeclared ? 'out-of-range' : 'outliers',
      weight: out.count > channel.values.length / 100 ? 'serious' : 'look',
      signal: signal.name,
      from: iso(out.firstMs),
      to: iso(out.lastMs),
      count: out.count,
      sentence: isDeclared
        ? `${signal.name} lies outside its range of ${span} in ${counted(out.count, 'reading')}, worst ${figure(out.worst)}; they were left out.`
        : `${signal.name} has ${counted(out.count, 'reading')} absurdly far from all others, worst ${figure(out.worst)}; nothing is learned from them.`,
      advice: isDeclared
        ? 'Mend the range in the site file if these readings are real.'
        : 'Declare the range of the signal in the site file; the gateway refuses readings outside it.',
    },
  ];
}

/** Single ticks that jump far away and back. */
export function spikeFindings(series: Series, c: number): Finding[] {
  const values = series.values[c] as Float64Array;
  const steps = new Float64Array(Math.max(0, values.length - 1));
  for (let n = 0; n < steps.length; n++) steps[n] = Math.abs((values[n + 1] as number) - (values[n] as number));
  const usual = steps.length < FEWEST ? Number.NaN : (quantiles(steps, [0.999])[0] as number);
  if (!(usual > 0)) return [];
  const at: number[] = [];
  for (let n = 1; n + 1 < values.length; n++) {
    const away = (values[n] as number) - (values[n - 1] as number);
    const back = (values[n + 1] as number) - (values[n] as number);
    if (away * back < 0 && Math.min(Math.abs(away), Math.abs(back)) > SPIKE_TIMES * usual) at.push(n);
  }
  if (at.length === 0) return [];
  const name = series.names[c] as string;
  const timeOf = (n: number): string => iso((series.firstTick + n) * series.tickMs);
  return [
    {
      kind: 'spikes',
      weight: 'look',
      signal: name,
      from: timeOf(at[0] as number),
      to: timeOf(at.at(-1) as number),
      count: at.length,
      sentence: `${name} jumps away and back within one tick ${counted(at.length, 'time')}, first to ${figure(values[at[0] as number] as number)} at ${timeOf(at[0] as number)}; usual steps stay within ${figure(usual)}.`,
      advice: 'The model passes over single wild readings; look at the sensor’s wiring if there are many.',
    },
  ];
}
