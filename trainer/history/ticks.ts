/**
 * A history laid on the site's ticks: sorted by time, implausible readings left out, one value a tick by each signal's
 * aggregate, every value on its lattice; in sums and counters a row written twice counts once. The survey tells what was
 * left out.
 */
import { createHash } from 'node:crypto';
import type { Signal, Site } from '@stillwell/protocol';
import { TrainError } from '../errors.ts';
import { channelsOf } from './channels.ts';
import type { ChannelReadings, History } from './history.ts';
import { LaidSpan, layChannel } from './lay-channel.ts';
import { type Plausibility, type Plausible, plausibilityOf } from './plausible.ts';
import { findLattices, type Lattice } from './resolution.ts';
import type { Series } from './series.ts';

/** A history with more empty ticks than these to one reading has a stray time in it. */
const MOST_EMPTY = 1000;
const FEW_TICKS = 1_000_000;

/** Positions of the readings in order of time, later ones in the file last among equals; null where they lie so already. */
export function timeOrder(times: Float64Array): Uint32Array | null {
  let isSorted = true;
  for (let i = 1; i < times.length && isSorted; i++) isSorted = (times[i] as number) >= (times[i - 1] as number);
  if (isSorted) return null;
  const order = Uint32Array.from(times, (_, i) => i);
  return order.sort((a, b) => (times[a] as number) - (times[b] as number) || a - b);
}

/** First and last tick with a reading, and how many; null where there is none. */
export function tickSpan(
  channels: readonly ChannelReadings[],
  tickMs: number,
): { first: number; last: number; readings: number } | null {
  let first = Number.POSITIVE_INFINITY;
  let last = Number.NEGATIVE_INFINITY;
  let readings = 0;
  for (const times of new Set(channels.map((channel) => channel.times))) {
    readings = Math.max(readings, times.length);
    for (let i = 0; i < times.length; i++) {
      const time = times[i] as number;
      if (time < first) first = time;
      if (time > last) last = time;
    }
  }
  return readings === 0 ? null : { first: Math.floor(first / tickMs), last: Math.floor(last / tickMs), readings };
}

/** SHA-256 over tick, span and values of a series. */
export function digestOf(tickMs: number, firstTick: number, values: readonly Float64Array[]): Uint8Array {
  const hash = createHash('sha256');
  hash.update(new Uint8Array(Float64Array.of(tickMs, firstTick, values.length, values[0]?.length ?? 0).buffer));
  for (const one of values) hash.update(new Uint8Array(one.buffer, one.byteOffset, one.byteLength));
  return new Uint8Array(hash.digest());
}

/**
 * Refuses a history that a stray time stretches.
 *
 * throws  TrainError 'history' where its ticks are empty but for one in a thousand
 */
export function checkStretch(names: string, readings: number, first: number, ticks: number, tickMs: number): void {
  if (!(ticks > FEW_TICKS && ticks / readings > MOST_EMPTY)) return;
  const at = (tick: number): string => new Date(tick * tickMs).toISOString();
  throw new TrainError(
    'history',
    `${names}: expected readings most of the time, got ${readings} in ${ticks} ticks from ${at(first)} to ${at(first + ticks - 1)}; a stray time stretches the history: take that row out`,
  );
}

/**
 * Lays a history on ticks.
 *
 * lattices      by channel; found in the history when absent
 * plausibility  which readings are taken; those plausible beside the whole history when absent
 * throws        TrainError 'history' where it is shorter than two ticks, or stretched out by a stray time
 */
export function layOnTicks(
  history: History,
  site: Site,
  lattices: readonly Lattice[] = findLattices(history, site),
  { spans, untilMs }: Plausibility = plausibilityOf(history, site),
): Series {
  const { tickMs } = site;
  const span = tickSpan(history.channels, tickMs);
  const ticks = span === null ? 0 : span.last - span.first + 1;
  const names = history.files.map(({ file }) => file).join(', ');
  if (span === null || ticks < 2)
    throw new TrainError(
      'history',
      `${names}: expected readings over at least two ticks of ${tickMs / 1000} s, got ${span === null ? 'none' : 'one tick'} in the time asked for; give a longer history, a shorter tick, or other times to start and end at`,
    );
  checkStretch(names, span.readings, span.first, ticks, tickMs);
  const orders = new Map<Float64Array, Uint32Array | null>();
  for (const { times } of history.channels) if (!orders.has(times)) orders.set(times, timeOrder(times));
  const channels = channelsOf(site);
  const laidSpan = new LaidSpan(tickMs, span.first, ticks);
  const values = history.channels.map((channel, c) =>
    layChannel(
      channel,
      channels[c] as Signal,
      lattices[c] as Lattice,
      orders.get(channel.times) ?? null,
      laidSpan,
      spans[c] as Plausible,
      untilMs,
    ),
  );
  return Object.freeze({
    tickMs,
    firstTick: span.first,
    ticks,
    names: channels.map(({ name }) => name),
    signalCount: site.signals.length,
    values,
    digest: digestOf(tickMs, span.first, values),
  });
}
