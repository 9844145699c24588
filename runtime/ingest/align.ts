/**
 * Lays readings on ticks by their own time. A tick closes once nothing for it is expected any more: when the watermark
 * (the newest reading's time, or the wall clock) has passed its end by the lateness allowed. Within the lateness the order
 * of arrival changes nothing; later readings become corrections while the tick is still remembered, and are counted and
 * dropped after that. Never throws on a reading.
 */
import { type Aggregate, type Site, wrapOf } from '@stillwell/protocol';
import { aggregateTick, latestValue, type TickReadings } from './aggregate.ts';

/** How readings are laid on ticks. */
export interface AlignerOptions {
  readonly tickMs: number;
  readonly latenessMs: number;
  /** (nc), signals first. */
  readonly aggregates: readonly Aggregate[];
  /** (nc) where each counter begins again, in its channel's unit; null where that is not known, and for all else. */
  readonly wraps?: readonly (number | null)[];
  /** Closed ticks whose readings are kept for corrections. Default 720. */
  readonly rememberTicks?: number;
}

/** What became of a reading. */
export type Placed =
  | 'taken'
  | 'duplicate'
  /** Its tick was closed; the tick's value changed. */
  | 'corrected'
  /** Its tick was closed; the tick's value stays. */
  | 'late-unchanged'
  /** Its tick is no longer remembered. */
  | 'too-late'
  /** Stamped implausibly far ahead. */
  | 'future'
  /** More readings in one tick than are kept. */
  | 'flood';

/** A changed value of a closed tick, in units of the channel. */
export interface LateChange {
  readonly tick: number;
  readonly channel: number;
  readonly value: number;
}

/** A tick as it closed; `values` (nc) is the aligner's own buffer, NaN where missing. */
export interface ClosedTick {
  readonly tick: number;
  readonly values: Float64Array;
}

/** What the readings so far leave behind beside themselves. */
export interface ReadingMarks {
  /** -Infinity before the first reading. */
  readonly newestMs: number;
  /** (nc) last counter readings, NaN where unknown. */
  readonly counters: readonly number[];
  /** (nc) times of the newest readings, NaN where there was none. */
  readonly latest: readonly number[];
}

/** Readings of ticks still open, for the journal. */
export interface OpenReadings {
  readonly marks: ReadingMarks;
  /** Visits them by tick, then channel, then arrival. */
  visit(take: (channel: number, timeMs: number, value: number) => void): void;
}

const DEFAULT_REMEMBER_TICKS = 720;
const MAX_READINGS_PER_TICK = 4096;
/** A stamp further ahead than this of everything before needs a second reading near it to be believed. */
const PLAUSIBLE_JUMP_MS = 24 * 3600 * 1000;

/** See the file head. */
export class Aligner {
  readonly #options: AlignerOptions;
  readonly #rememberTicks: number;
  readonly #values: Float64Array;
  /** Per tick, readings by channel; open ticks and remembered closed ones alike. */
  readonly #ticks = new Map<number, (TickReadings | undefined)[]>();
  /** (nc) counter reading that the next tick to close counts from. */
  readonly #counters: Float64Array;
  /** (nc) time of the newest reading taken, NaN before the first. */
  readonly lastReadingMs: Float64Array;
  #nextTick: number | null = null;
  /** Ticks before this one were closed elsewhere, with readings not known here. */
  #closedFrom = 0;
  #newestMs = Number.NEGATIVE_INFINITY;
  #suspectMs = Number.NaN;

  constructor(options: AlignerOptions) {
    this.#options = options;
    this.#rememberTicks = options.rememberTicks ?? DEFAULT_REMEMBER_TICKS;
    this.#values = new Float64Array(options.aggregates.length);
    this.#counters = new Float64Array(options.aggregates.length).fill(Number.NaN);
    this.lastReadingMs = new Float64Array(options.aggregates.length).fill(Number.NaN);
  }

  /** The next tick to close; null before the first reading. */
  get nextTick(): number | null {
    return this.#nextTick;
  }

  /** Time of the newest reading; -Infinity before the first. */
  get newestMs(): number {
    return this.#newestMs;
  }

  /** Readings of a channel in a tick that is open or remembered; undefined where none are known. */
  readingsOf(tick: number, channel: number): readonly number[] | undefined {
    return this.#ticks.get(tick)?.[channel]?.values;
  }

  /** Ticks before `tick` are closed, whatever came for them. */
  startAt(tick: number): void {
    this.#nextTick = tick;
    this.#closedFrom = tick;
    for (const known of this.#ticks.keys()) if (known < tick) this.#ticks.delete(known);
  }

  /** Forgets every reading and goes on at `tick`, wherever that lies. */
  renewAt(tick: number): void {
    this.#ticks.clear();
    this.#counters.fill(Number.NaN);
    this.lastReadingMs.fill(Number.NaN);
    this.#newestMs = Number.NEGATIVE_INFINITY;
    this.#suspectMs = Number.NaN;
    this.startAt(tick);
  }

  /** Passes over the next `count` ticks, which are then closed without a value. */
  skip(count: number): void {
    this.startAt((this.#nextTick ?? this.#firstTick()) + count);
  }

  /**
   * Places one reading.
   *
   * notAfterMs  readings stamped later are refused: the wall clock plus a little; null where only event time rules
   * onChange    called when a closed tick's value changed
   */
  place(
    channel: number,
    timeMs: number,
    value: number,
    notAfterMs: number | null,
    onChange: (change: LateChange) => void,
  ): Placed {
    if (!this.#isPlausible(timeMs, notAfterMs)) return 'future';
    const tick = Math.floor(timeMs / this.#options.tickMs);
    if (this.#nextTick !== null && tick < this.#nextTick)
      return this.#placeLate(tick, channel, timeMs, value, onChange);
    // Before the first tick has closed: a retained reading of last week does not make us start there.
    if (
      this.#nextTick === null &&
      tick < Math.floor((this.#newestMs - this.#options.latenessMs) / this.#options.tickMs)
    )
      return 'too-late';
    const placed = this.#append(tick, channel, timeMs, value);
    if (placed !== 'taken') return placed;
    this.#noteTime(channel, timeMs);
    return 'taken';
  }

  /**
   * Closes every tick that ended `latenessMs` or more before `nowMs`, in order.
   *
   * nowMs   the wall clock, or null: the newest reading's time
   * onTick  called for each tick
   * before  called for each, while it is still open
   */
  close(nowMs: number | null, onTick: (closed: ClosedTick) => void, before: (tick: number) => void = () => {}): number {
    const first = this.#nextTick ?? this.#firstTick();
    const end = first + this.#ticksDone(nowMs, first);
    for (let tick = first; tick < end; tick++) {
      before(tick);
      this.#shut(tick);
      onTick({ tick, values: this.#values });
    }
    return end - first;
  }

  /** How many ticks `close` would close now. */
  due(nowMs: number | null): number {
    return this.#ticksDone(nowMs, this.#nextTick ?? this.#firstTick());
  }

  /** Readings not yet in a closed tick, with all that is needed to go on from them. */
  openReadings(): OpenReadings {
    const marks = { newestMs: this.#newestMs, counters: [...this.#counters], latest: [...this.lastReadingMs] };
    const open = [...this.#ticks.keys()].filter((tick) => this.#nextTick === null || tick >= this.#nextTick);
    open.sort((a, b) => a - b);
    return {
      marks,
      visit: (take) => {
        for (const tick of open)
          this.#ticks.get(tick)?.forEach((readings, channel) => {
            for (let i = 0; readings && i < readings.times.length; i++)
              take(channel, readings.times[i]!, readings.values[i]!);
          });
      },
    };
  }

  /** Takes back the marks that `openReadings` gave. */
  restore({ newestMs, counters, latest }: ReadingMarks): void {
    this.#counters.set(counters.slice(0, this.#counters.length));
    this.lastReadingMs.set(latest.slice(0, this.#counters.length));
    this.#newestMs = Math.max(this.#newestMs, newestMs);
  }

  /** Takes a reading in again that was placed before a restart, without asking anew whether it may be. */
  replay(channel: number, timeMs: number, value: number): void {
    const tick = Math.floor(timeMs / this.#options.tickMs);
    const isLate = this.#nextTick !== null && tick < this.#nextTick;
    if (isLate && !this.#isRemembered(tick, channel)) return;
    if (this.#append(tick, channel, timeMs, value) === 'taken' && !isLate) this.#noteTime(channel, timeMs);
  }

  /** Closes a tick again that was closed before a restart; those before it are then closed too. */
  replayClose(tick: number): void {
    if (this.#nextTick !== tick) this.startAt(tick);
    this.#shut(tick);
  }

  #firstTick(): number {
    if (this.#ticks.size === 0) return 0;
    const first = Math.min(...this.#ticks.keys());
    this.#closedFrom = first;
    return first;
  }

  /** Ticks from `first` whose end lies before the watermark. */
  #ticksDone(nowMs: number | null, first: number): number {
    if (this.#nextTick === null && this.#ticks.size === 0) return 0;
    const watermark = (nowMs ?? this.#newestMs) - this.#options.latenessMs;
    return Math.max(0, Math.floor(watermark / this.#options.tickMs) - first);
  }

  #isPlausible(timeMs: number, notAfterMs: number | null): boolean {
    if (!Number.isFinite(timeMs) || timeMs < 0) return false;
    if (notAfterMs !== null) return timeMs <= notAfterMs;
    if (this.#newestMs === Number.NEGATIVE_INFINITY || timeMs - this.#newestMs <= PLAUSIBLE_JUMP_MS) return true;
    if (Math.abs(timeMs - this.#suspectMs) <= PLAUSIBLE_JUMP_MS) return true;
    this.#suspectMs = timeMs;
    return false;
  }

  #noteTime(channel: number, timeMs: number): void {
    if (timeMs > this.#newestMs) this.#newestMs = timeMs;
    if (!(timeMs <= this.lastReadingMs[channel]!)) this.lastReadingMs[channel] = timeMs;
  }

  #append(tick: number, channel: number, timeMs: number, value: number): Placed {
    let channels = this.#ticks.get(tick);
    if (channels === undefined) {
      channels = new Array<TickReadings | undefined>(this.#values.length).fill(undefined);
      this.#ticks.set(tick, channels);
    }
    channels[channel] ??= { times: [], values: [] };
    const readings = channels[channel];
    for (let i = readings.times.length - 1; i >= 0; i--)
      if (readings.times[i] === timeMs && readings.values[i] === value) return 'duplicate';
    if (readings.times.length >= MAX_READINGS_PER_TICK) return 'flood';
    readings.times.push(timeMs);
    readings.values.push(value);
    return 'taken';
  }

  #placeLate(
    tick: number,
    channel: number,
    timeMs: number,
    value: number,
    onChange: (change: LateChange) => void,
  ): Placed {
    if (tick < this.#rememberedFrom()) return 'too-late';
    if (!this.#isRemembered(tick, channel)) return 'late-unchanged';
    const before = this.#aggregate(tick, channel);
    const placed = this.#append(tick, channel, timeMs, value);
    if (placed !== 'taken') return placed;
    const after = this.#aggregate(tick, channel);
    if (Object.is(before, after)) return 'late-unchanged';
    onChange({ tick, channel, value: after });
    return 'corrected';
  }

  /** First closed tick whose readings are still known. */
  #rememberedFrom(): number {
    return Math.max(this.#closedFrom, (this.#nextTick ?? 0) - this.#rememberTicks);
  }

  /** Whether a late reading may still change a tick: an increment's next tick has counted it already. */
  #isRemembered(tick: number, channel: number): boolean {
    return tick >= this.#rememberedFrom() && this.#options.aggregates[channel] !== 'increment';
  }

  #aggregate(tick: number, channel: number): number {
    const readings = this.#ticks.get(tick)?.[channel];
    return readings ? aggregateTick(this.#options.aggregates[channel]!, readings, Number.NaN) : Number.NaN;
  }

  /** Leaves the tick's values in the buffer and counts it among the closed. */
  #shut(tick: number): void {
    this.#fold(tick);
    this.#nextTick = tick + 1;
    this.#ticks.delete(tick - this.#rememberTicks);
  }

  #fold(tick: number): void {
    const channels = this.#ticks.get(tick);
    for (let c = 0; c < this.#values.length; c++) {
      const readings = channels?.[c];
      if (!readings) {
        this.#values[c] = Number.NaN;
        // What a counter counts across a tick without a reading belongs to no one tick, to the trainer as here.
        this.#counters[c] = Number.NaN;
        continue;
      }
      const wrap = this.#options.wraps?.[c] ?? null;
      this.#values[c] = aggregateTick(this.#options.aggregates[c]!, readings, this.#counters[c]!, wrap);
      if (this.#options.aggregates[c] === 'increment' && readings.times.length > 0)
        this.#counters[c] = latestValue(readings);
    }
  }
}

/** For the channels of a site, as its file has them aggregated. */
export function alignerOf(site: Site): Aligner {
  const channels = [...site.signals, ...site.inputs];
  const aggregates = channels.map((channel) => channel.aggregate);
  return new Aligner({ tickMs: site.tickMs, latenessMs: site.latenessMs, aggregates, wraps: channels.map(wrapOf) });
}
