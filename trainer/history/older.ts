/**
 * What is older than the window of a long history: laid on ticks chunk by chunk, by the rules that hold for any history,
 * and handed to whoever learns from it. Two things differ, since the whole is never seen at once: values lie on a lattice
 * only where the site file declares a resolution, and what is plausible without a declared range is found from a thinned
 * sample of the readings so far.
 */
import { createHash } from 'node:crypto';
import { type Signal, type Site, wrapOf } from '@stillwell/protocol';
import { believe, type Remembered, remember } from '../exclusions.ts';
import { TickValue } from './aggregate.ts';
import { channelsOf } from './channels.ts';
import type { ChannelReadings, History } from './history.ts';
import { LaidSpan, layChannel } from './lay-channel.ts';
import { type Plausible, plausibleSpan } from './plausible.ts';
import { type Group, mergeReadings, type RecentReadings } from './recent.ts';
import type { Series } from './series.ts';
import { ThinnedSample, type ThinnedState } from './thinned-sample.ts';

/**
 * Who learns from what is older: chunks of consecutive ticks, raw units, NaN missing. A chunk is given away for good, so that
 * it can go to another thread; a promise is waited for before the next is laid.
 */
export interface OlderSink {
  take(older: Series): void | Promise<void>;
  /** All it holds, so that a later run goes on from there. */
  snapshot(): Uint8Array | Promise<Uint8Array>;
  restore(bytes: Uint8Array): void | Promise<void>;
  /** Told that nothing follows. */
  end?(): void;
}

/** What was older than the window, for notes and provenance. */
export interface OlderFacts {
  readonly fromTick: number;
  /** First tick of the window. */
  readonly toTick: number;
  readonly ticks: number;
  readonly chunks: number;
  /** By channel: ticks with a value, and the share without. */
  readonly readings: readonly number[];
  readonly missingShare: readonly number[];
  /** Ticks that the site file excludes for the whole plant. */
  readonly excludedTicks: number;
  /** Rows of the whole history, and those earlier than the row before them in their file: they were sorted. */
  readonly rows: number;
  readonly outOfOrder: number;
  /** SHA-256 over the chunks as laid, each with the digest before it; 32 bytes. */
  readonly digest: Uint8Array;
}

/** Numbers that a later run goes on from. */
export interface OlderState {
  readonly fromTick: number | null;
  readonly toTick: number | null;
  readonly chunks: number;
  readonly readings: readonly number[];
  readonly excludedTicks: number;
  readonly digest: string;
  readonly samples: readonly ThinnedState[];
  readonly counters: readonly (readonly [number | null, number | null])[];
  readonly plausible: readonly (readonly [low: number | null, high: number | null])[];
  readonly remembered: readonly Remembered[];
}

const NOTHING = new Float64Array(0);
/** The plausible spans are found anew in each of the first chunks, then in every so many. */
const FIRST_CHUNKS = 8;

/** Lays and hands on. */
export class OlderTicks {
  readonly #site: Site;
  readonly #sink: OlderSink;
  readonly #channels: readonly Signal[];
  readonly #ticks: readonly TickValue[];
  readonly #samples: readonly ThinnedSample[];
  readonly #readings: number[];
  #plausible: Plausible[] = [];
  #remembered: readonly Remembered[] = [];
  #fromTick: number | null = null;
  #toTick: number | null = null;
  #chunks = 0;
  #excludedTicks = 0;
  #digest: Uint8Array = new Uint8Array(32);

  constructor(site: Site, sink: OlderSink) {
    this.#site = site;
    this.#sink = sink;
    this.#channels = channelsOf(site);
    this.#ticks = this.#channels.map((signal) => new TickValue(signal.aggregate, wrapOf(signal)));
    this.#samples = this.#channels.map(() => new ThinnedSample());
    this.#readings = this.#channels.map(() => 0);
  }

  /** Hands on every chunk that is due; at the end also the rest before the window. */
  async handOn(recent: RecentReadings, isLast: boolean): Promise<void> {
    for (let due = recent.due(isLast); due !== null; due = recent.due(isLast)) {
      const channels = channelsBefore(recent, due.toTick, this.#channels);
      const series = this.#lay(channels, this.#ahead(recent, due.toTick, channels), due.fromTick, due.toTick);
      recent.handOn(due.toTick);
      await this.#sink.take(series);
    }
  }

  /** Readings of a chunk and, where an exclusion reaches back from what its signal says, of the time after it. */
  #ahead(recent: RecentReadings, toTick: number, chunk: readonly ChannelReadings[]): readonly ChannelReadings[] {
    const before = this.#site.exclude.map((entry) => ('fromMs' in entry ? 0 : entry.beforeMs));
    const furthest = Math.max(0, ...before);
    if (furthest === 0) return chunk;
    return channelsBefore(recent, toTick + Math.ceil(furthest / this.#site.tickMs), this.#channels);
  }

  #lay(
    channels: readonly ChannelReadings[],
    ahead: readonly ChannelReadings[],
    fromTick: number,
    toTick: number,
  ): Series {
    this.#look(channels);
    const history = historyOf(channels, this.#site);
    const { seen, mark } = believe(history, this.#site, this.#remembered, historyOf(ahead, this.#site));
    this.#remembered = remember(history, this.#site, this.#remembered, toTick * this.#site.tickMs);
    const { tickMs } = this.#site;
    const span = new LaidSpan(tickMs, fromTick, toTick - fromTick);
    const values = seen.channels.map((channel, c) => {
      const signal = this.#channels[c] as Signal;
      const lattice = signal.resolution === null ? null : { step: signal.resolution, offset: 0 };
      const plausible = this.#plausible[c] as Plausible;
      return layChannel(channel, signal, lattice, null, span, plausible, Number.POSITIVE_INFINITY, this.#ticks[c]);
    });
    this.#digest = chained(this.#digest, fromTick, values);
    const names = this.#channels.map(({ name }) => name);
    const laid = { tickMs, firstTick: fromTick, ticks: span.ticks, names, values, digest: this.#digest };
    const series = mark({ ...laid, signalCount: history.signalCount });
    this.#count(series);
    this.#fromTick ??= fromTick;
    this.#toTick = toTick;
    this.#chunks++;
    return series;
  }

  /** Looks at the readings of the next chunk, before they are held against what is plausible. */
  #look(channels: readonly ChannelReadings[]): void {
    const isDue = this.#chunks < FIRST_CHUNKS || this.#chunks % FIRST_CHUNKS === 0 || this.#plausible.length === 0;
    channels.forEach(({ values }, c) => {
      if (this.#channels[c]?.range === null) this.#samples[c]?.add(values);
    });
    if (!isDue) return;
    this.#plausible = this.#channels.map((signal, c) =>
      plausibleSpan(signal, signal.range === null ? (this.#samples[c] as ThinnedSample).values() : NOTHING),
    );
  }

  #count({ values, excluded }: Series): void {
    values.forEach((y, c) => {
      let count = 0;
      for (let t = 0; t < y.length; t++) if (!Number.isNaN(y[t])) count++;
      this.#readings[c] += count;
    });
    if (excluded !== undefined) for (const flag of excluded.isExcluded) this.#excludedTicks += flag;
  }

  /** What was read so far says of time that must not teach after it. */
  get remembered(): readonly Remembered[] {
    return this.#remembered;
  }

  /** What was handed on; null where nothing was. */
  facts(rows: number, outOfOrder: number): OlderFacts | null {
    if (this.#fromTick === null || this.#toTick === null) return null;
    const ticks = this.#toTick - this.#fromTick;
    return Object.freeze({
      ...{ fromTick: this.#fromTick, toTick: this.#toTick, ticks, chunks: this.#chunks },
      readings: [...this.#readings],
      missingShare: this.#readings.map((count) => 1 - count / ticks),
      ...{ excludedTicks: this.#excludedTicks, rows, outOfOrder, digest: this.#digest },
    });
  }

  state(): OlderState {
    const orNull = (value: number): number | null => (Number.isFinite(value) ? value : null);
    return {
      ...{ fromTick: this.#fromTick, toTick: this.#toTick, chunks: this.#chunks, readings: this.#readings },
      ...{ excludedTicks: this.#excludedTicks, digest: Buffer.from(this.#digest).toString('hex') },
      samples: this.#samples.map((sample) => sample.state()),
      counters: this.#ticks.map(({ carried }) => [orNull(carried[0]), orNull(carried[1])] as const),
      plausible: this.#plausible.map(({ low, high }) => [orNull(low), orNull(high)] as const),
      remembered: this.#remembered,
    };
  }

  restore(state: OlderState): void {
    this.#fromTick = state.fromTick;
    this.#toTick = state.toTick;
    this.#chunks = state.chunks;
    this.#excludedTicks = state.excludedTicks;
    this.#digest = Uint8Array.from(Buffer.from(state.digest, 'hex'));
    state.readings.forEach((count, c) => {
      this.#readings[c] = count;
    });
    state.samples.forEach((sample, c) => {
      this.#samples[c]?.restore(sample);
    });
    this.#remembered = state.remembered;
    this.#plausible = state.plausible.map(([low, high], c) => ({
      low: low ?? Number.NEGATIVE_INFINITY,
      high: high ?? Number.POSITIVE_INFINITY,
      isDeclared: this.#channels[c]?.range !== null,
    }));
    state.counters.forEach(([value, tick], c) => {
      this.#ticks[c]?.carry([value ?? Number.NaN, tick ?? Number.NaN]);
    });
  }
}

function historyOf(channels: readonly ChannelReadings[], site: Site): History {
  return { channels, signalCount: site.signals.length, files: [], zone: null, clockChanges: [] };
}

/** The readings before a tick by channel, in order of time. */
function channelsBefore(recent: RecentReadings, toTick: number, channels: readonly Signal[]): ChannelReadings[] {
  const parts = recent.before(toTick);
  return channels.map(({ name }, c) => {
    const mine = parts.flatMap(({ group, times }) => {
      const at = group.channels.indexOf(c);
      return at < 0 || times.length === 0 ? [] : [{ name, times, values: valuesOf(group, at, times.length) }];
    });
    return mine.length === 1 ? (mine[0] as ChannelReadings) : mergeReadings(name, mine);
  });
}

function valuesOf(group: Group, at: number, count: number): Float64Array {
  return group.values[at]?.view(group.head, group.head + count) ?? NOTHING;
}

function chained(before: Uint8Array, fromTick: number, values: readonly Float64Array[]): Uint8Array {
  const hash = createHash('sha256').update(before);
  hash.update(new Uint8Array(Float64Array.of(fromTick, values.length, values[0]?.length ?? 0).buffer));
  for (const one of values) hash.update(new Uint8Array(one.buffer, one.byteOffset, one.byteLength));
  return new Uint8Array(hash.digest());
}
