/**
 * Which readings can be believed at all: those inside the site file's range; without one, those within a hundred times
 * the usual spread of the signal. A single 1e12 from a broken converter would otherwise decide every scale. The usual
 * spread is found from time that is learned from, never from time that judges; there readings count as the gateway would
 * take them, which knows declared ranges alone.
 */
import type { Signal, Site } from '@stillwell/protocol';
import { channelsOf } from './channels.ts';
import type { History } from './history.ts';
import { quantiles } from './order-statistics.ts';

const FEWEST = 100;
const USUAL = [0.005, 0.995];
const TIMES_SPREAD = 100;
const TIMES_LEVEL = 1e6;

/** Inclusive bounds, and whether a person declared them. */
export interface Plausible {
  readonly low: number;
  readonly high: number;
  readonly isDeclared: boolean;
}

const ALL: Plausible = { low: Number.NEGATIVE_INFINITY, high: Number.POSITIVE_INFINITY, isDeclared: false };

const NOTHING = new Float64Array(0);

/** Bounds for a signal's readings; NaN among them is passed over. */
export function plausibleSpan(signal: Signal, values: Float64Array): Plausible {
  if (signal.range !== null) return { low: signal.range[0], high: signal.range[1], isDeclared: true };
  if (values.length < FEWEST) return ALL;
  const [low, high] = quantiles(values, USUAL) as [number, number];
  if (Number.isNaN(low)) return ALL;
  const margin = high > low ? TIMES_SPREAD * (high - low) : TIMES_LEVEL * Math.max(1, Math.abs(low));
  return { low: low - margin, high: high + margin, isDeclared: false };
}

/** Which readings of a history are taken. */
export interface Plausibility {
  /** By channel. */
  readonly spans: readonly Plausible[];
  /** From here on, ms since 1970 UTC, declared spans alone count. */
  readonly untilMs: number;
}

/** Plausible spans of a history, undeclared ones found from its readings before `untilMs` and holding for those alone. */
export function plausibilityOf(history: History, site: Site, untilMs = Number.POSITIVE_INFINITY): Plausibility {
  const spans = channelsOf(site).map((signal, c) => {
    const { times, values } = history.channels[c] as History['channels'][number];
    const isWhole = signal.range !== null || untilMs === Number.POSITIVE_INFINITY;
    return plausibleSpan(signal, isWhole ? values : readBefore(times, values, untilMs));
  });
  return { spans, untilMs };
}

function readBefore(times: Float64Array, values: Float64Array, untilMs: number): Float64Array {
  const kept = new Float64Array(values.length);
  let count = 0;
  for (let i = 0; i < values.length; i++) if ((times[i] as number) < untilMs) kept[count++] = values[i] as number;
  return kept.subarray(0, count);
}

/** What the gateway takes: no range but a declared one. */
export function asTheGateway(site: Site): Plausibility {
  return { spans: channelsOf(site).map((signal) => plausibleSpan(signal, NOTHING)), untilMs: Number.NEGATIVE_INFINITY };
}
