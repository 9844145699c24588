/**
 * The newest readings of a long history, in order of time, while its files stream past: what has become older than the
 * window is handed on in chunks of whole ticks. A reading may come late by as much as the window is long; one that comes
 * later still cannot be put where it belongs any more, and the caller is told.
 *
 * The rule for late readings looks at every row for itself, so that it never depends on how rows came in blocks.
 */
import { GrowingList } from './growing.ts';
import type { ChannelReadings } from './history.ts';
import { timeOrder } from './ticks.ts';

/** Where a history counts as long, and how it is cut; ticks. */
export interface LongLimits {
  readonly longFrom: number;
  readonly recentTicks: number;
  readonly chunkTicks: number;
  /** Stored bytes of a text file read at once; a few thousand rows' when absent. */
  readonly blockBytes?: number;
}

/** Readings of channels that share their times. */
export interface Group {
  readonly channels: readonly number[];
  readonly times: GrowingList;
  readonly values: readonly GrowingList[];
  /** Rows before it were handed on. */
  head: number;
  /** Rows from head to here are in order of time. */
  sortedTo: number;
}

/** Numbers that a later run goes on from. */
export interface RecentState {
  readonly firstTick: number | null;
  readonly newestMs: number | null;
  readonly handedTo: number | null;
  readonly rows: number;
}

/** Rows handed on stay in their lists until there are so many of them: moving the rest costs more than their memory. */
const DROP_FROM = 30_000;

/** Holds the window. */
export class RecentReadings {
  readonly #tickMs: number;
  readonly #limits: LongLimits;
  readonly #groups = new Map<string, Group>();
  #first = Number.POSITIVE_INFINITY;
  #newest = Number.NEGATIVE_INFINITY;
  /** First tick not handed on by the rule, and the time from which on the rule moves it. */
  #edge = Number.NEGATIVE_INFINITY;
  #edgeMs = Number.NEGATIVE_INFINITY;
  #nextMs = Number.POSITIVE_INFINITY;
  #handedTo = Number.NEGATIVE_INFINITY;
  #newestMs = Number.NEGATIVE_INFINITY;
  rows = 0;

  constructor(tickMs: number, limits: LongLimits) {
    this.#tickMs = tickMs;
    this.#limits = limits;
  }

  /** True once more ticks were seen than a short history has. */
  get isLong(): boolean {
    return this.#newest - this.#first + 1 > this.#limits.longFrom;
  }

  /** First tick of the history; that of the window, once all is read; one behind the newest. */
  get firstTick(): number {
    return this.#first;
  }
  get cutTick(): number {
    return this.isLong ? this.endTick - this.#limits.recentTicks : this.#first;
  }
  get endTick(): number {
    return this.#newest + 1;
  }

  /** Earliest time that may still come, ms; anything before the history is long. */
  get earliestMs(): number {
    return this.#edgeMs;
  }
  get newestMs(): number {
    return this.#newestMs;
  }
  /** How late a reading may come in a long history. */
  get windowMs(): number {
    return this.#limits.recentTicks * this.#tickMs;
  }

  /**
   * Takes rows.
   *
   * shapes   values[i] of channels[i], as long as times
   * returns  position of the first row that comes too late, rows before it taken; -1 where all were taken
   */
  append(channels: readonly number[], times: Float64Array, values: readonly Float64Array[]): number {
    const group = this.group(channels);
    const late = this.#look(times);
    const count = late < 0 ? times.length : late;
    group.times.append(times.subarray(0, count));
    values.forEach((column, i) => {
      group.values[i].append(column.subarray(0, count));
    });
    this.rows += count;
    return late;
  }

  /** The group of these channels, made where there is none. */
  group(channels: readonly number[]): Group {
    const key = channels.join(' ');
    let group = this.#groups.get(key);
    if (!group) {
      group = {
        channels: [...channels],
        times: new GrowingList(),
        values: channels.map(() => new GrowingList()),
        head: 0,
        sortedTo: 0,
      };
      this.#groups.set(key, group);
    }
    return group;
  }

  /** True where some row held the channel. */
  holds(channel: number): boolean {
    return [...this.#groups.values()].some((group) => group.channels.includes(channel));
  }

  get groups(): Iterable<Group> {
    return this.#groups.values();
  }

  #look(times: Float64Array): number {
    for (let i = 0; i < times.length; i++) {
      const time = times[i] as number;
      if (time < this.#edgeMs) return i;
      if (time < this.#newestMs) {
        if (Math.floor(time / this.#tickMs) < this.#first) this.#stretch(time);
        continue;
      }
      this.#newestMs = time;
      if (time >= this.#nextMs || this.#newest < this.#first) this.#stretch(time);
    }
    if (times.length > 0) this.#newest = Math.max(this.#newest, Math.floor(this.#newestMs / this.#tickMs));
    return -1;
  }

  /** Moves first, newest and edge to a time that may change them. */
  #stretch(time: number): void {
    const { longFrom, recentTicks, chunkTicks } = this.#limits;
    const tick = Math.floor(time / this.#tickMs);
    this.#first = Math.min(this.#first, tick);
    this.#newest = Math.max(this.#newest, Math.floor(this.#newestMs / this.#tickMs), tick);
    const ticks = this.#newest - this.#first + 1;
    if (ticks > longFrom) {
      this.#edge = this.#first + Math.floor((ticks - recentTicks) / chunkTicks) * chunkTicks;
      this.#edgeMs = this.#edge * this.#tickMs;
      if (this.#handedTo < this.#first) this.#handedTo = this.#first;
      this.#nextMs = (this.#edge + chunkTicks + recentTicks - 1) * this.#tickMs;
    } else this.#nextMs = (this.#first + longFrom) * this.#tickMs;
  }

  /** Takes the next run of ticks that is due: whole chunks, at the end (`isLast`) also the part of one up to the window. */
  due(isLast: boolean): { readonly fromTick: number; readonly toTick: number } | null {
    if (!this.isLong) return null;
    const fromTick = this.#handedTo;
    const toTick = Math.min(fromTick + this.#limits.chunkTicks, isLast ? this.cutTick : this.#edge);
    return toTick > fromTick && (isLast || toTick === fromTick + this.#limits.chunkTicks) ? { fromTick, toTick } : null;
  }

  /** Readings before a tick by group, in order of time: views, good until `handOn`. */
  before(toTick: number): { readonly group: Group; readonly times: Float64Array; readonly to: number }[] {
    const limitMs = toTick * this.#tickMs;
    return [...this.#groups.values()].map((group) => {
      sortGroup(group);
      const times = group.times.view(group.head);
      return {
        group,
        times: times.subarray(0, lowerBound(times, limitMs)),
        to: group.head + lowerBound(times, limitMs),
      };
    });
  }

  /** Lets go of the readings before a tick. */
  handOn(toTick: number): void {
    for (const { group, to } of this.before(toTick)) {
      group.head = to;
      if (group.head < DROP_FROM && group.head < group.times.length) continue;
      for (const list of [group.times, ...group.values]) list.drop(group.head);
      group.sortedTo -= group.head;
      group.head = 0;
    }
    this.#handedTo = toTick;
  }

  /** What is left, by channel, in order of time. */
  channels(names: readonly string[]): ChannelReadings[] {
    const groups = [...this.#groups.values()];
    groups.forEach(sortGroup);
    const times = new Map<Group, Float64Array>();
    const timesOf = (group: Group): Float64Array => {
      const known = times.get(group) ?? group.times.view(group.head).slice();
      times.set(group, known);
      return known;
    };
    return names.map((name, c) => joined(name, groups, c, timesOf));
  }

  /** Numbers for a later run; the groups' lists are saved beside them. */
  state(): RecentState {
    const orNull = (value: number): number | null => (Number.isFinite(value) ? value : null);
    return {
      firstTick: orNull(this.#first),
      newestMs: orNull(this.#newestMs),
      handedTo: orNull(this.#handedTo),
      rows: this.rows,
    };
  }

  /** Goes on from an earlier run, before any row is taken; the groups' lists are filled by the caller. */
  restore(state: RecentState): void {
    this.rows = state.rows;
    if (state.firstTick === null || state.newestMs === null) return;
    this.#first = state.firstTick;
    this.#newestMs = state.newestMs;
    this.#handedTo = state.handedTo ?? Number.NEGATIVE_INFINITY;
    this.#stretch(this.#newestMs);
  }
}

/** The readings of one channel, of all groups that hold it. */
function joined(
  name: string,
  groups: readonly Group[],
  channel: number,
  timesOf: (group: Group) => Float64Array,
): ChannelReadings {
  const mine = groups.filter((group) => group.channels.includes(channel) && group.times.length > group.head);
  const valuesOf = (group: Group): Float64Array =>
    (group.values[group.channels.indexOf(channel)] as GrowingList).view(group.head).slice();
  if (mine.length === 1) return { name, times: timesOf(mine[0] as Group), values: valuesOf(mine[0] as Group) };
  return mergeReadings(
    name,
    mine.map((group) => ({ name, times: timesOf(group), values: valuesOf(group) })),
  );
}

/** Readings of several sources as one, in order of time; of equal times those of the earlier source come first. */
export function mergeReadings(name: string, parts: readonly ChannelReadings[]): ChannelReadings {
  const times = concat(parts.map((part) => part.times));
  const values = concat(parts.map((part) => part.values));
  const order = timeOrder(times);
  if (order === null) return { name, times, values };
  return { name, times: Float64Array.from(order, (i) => times[i]), values: Float64Array.from(order, (i) => values[i]) };
}

function concat(parts: readonly Float64Array[]): Float64Array {
  const whole = new Float64Array(parts.reduce((sum, part) => sum + part.length, 0));
  let at = 0;
  for (const part of parts) {
    whole.set(part, at);
    at += part.length;
  }
  return whole;
}

/** Puts the rows that came since the last time in order; equal times stay in the order they came in. */
function sortGroup(group: Group): void {
  const times = group.times.view();
  let from = Math.max(group.sortedTo, group.head + 1);
  while (from < times.length && times[from] >= times[from - 1]) from++;
  group.sortedTo = times.length;
  if (from >= times.length) return;
  let least = Number.POSITIVE_INFINITY;
  for (let i = from; i < times.length; i++) if (times[i] < least) least = times[i];
  let start = from;
  while (start > group.head && times[start - 1] > least) start--;
  const part = times.slice(start);
  const order = timeOrder(part);
  if (order === null) return;
  for (const list of [group.times, ...group.values]) {
    const mixed = list.view(start);
    const copy = mixed.slice();
    for (let i = 0; i < order.length; i++) mixed[i] = copy[order[i]];
  }
}

/** First position whose time is not before the limit. */
function lowerBound(times: Float64Array, limit: number): number {
  let low = 0;
  let high = times.length;
  while (low < high) {
    const middle = (low + high) >> 1;
    if (times[middle] < limit) low = middle + 1;
    else high = middle;
  }
  return low;
}
