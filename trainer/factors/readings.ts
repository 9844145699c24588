/**
 * From readings as they come to runs without gaps. Short gaps are bridged by a straight line, so their ticks wait until the
 * next reading; a long gap in a signal and excluded time end the run, as they keep origins out when learning from a history. A
 * signal that stays away much longer is taken for absent: the others go on without it. Inputs are commands, which hold until the
 * next one.
 */
import type { Series } from '../history/series.ts';
import type { FactorsShape, Waiting } from './factors.ts';
import type { Carrier } from './open-state.ts';
import type { RunBook } from './run-book.ts';
import { WildWatch } from './wild.ts';

/** A signal silent for this many long gaps is absent. */
const ABSENT_GAPS = 8;

/** Ticks of the longest chunk whose room is kept for the next. */
const MOST_KEPT = 32_768;

/** Of a channel at a tick. */
const HERE = 0;
const GONE = 1;
const ABSENT = 2;
/** An input in a long gap. */
const HELD = 3;

/** (nc) of (ticks) each: readings as they came, completed, less their offsets, and what each tick is. */
interface Room {
  readonly raw: readonly Float64Array[];
  readonly complete: readonly Float64Array[];
  readonly aboutOffsets: readonly Float64Array[];
  readonly status: readonly Uint8Array[];
}

/** Readings on their way into the books. */
export class Readings {
  readonly #shape: FactorsShape;
  readonly #book: RunBook;
  readonly #watches: readonly WildWatch[];
  /** (nc) what levels are counted from; NaN until a reading came. */
  readonly offsets: Float64Array;
  /** (nc) last value before what waits; NaN: none. */
  readonly #last: Float64Array;
  /** (nc) ticks of the long gap that a channel is in before what waits. */
  readonly #gap: Float64Array;
  /** (nc) of ticks that wait, NaN missing; and 1 where they are excluded. The newest is not yet held against its next. */
  #waiting: Float64Array[];
  #isExcluded: Uint8Array;
  #room: Room | null = null;

  constructor(shape: FactorsShape, book: RunBook, from: { offsets: Float64Array; waiting: Waiting } | null) {
    this.#shape = shape;
    this.#book = book;
    const channels = shape.names.length;
    this.#watches = Array.from({ length: shape.signalCount }, () => new WildWatch());
    this.offsets = from?.offsets.slice() ?? new Float64Array(channels).fill(Number.NaN);
    this.#last = from?.waiting.last.slice() ?? new Float64Array(channels).fill(Number.NaN);
    this.#gap = from?.waiting.gap.slice() ?? new Float64Array(channels);
    this.#waiting =
      from?.waiting.values.map((row) => row.slice()) ?? Array.from({ length: channels }, () => new Float64Array(0));
    this.#isExcluded = from?.waiting.isExcluded.slice() ?? new Uint8Array(0);
    from?.waiting.watches.forEach((state, c) => {
      this.#watches[c].restore(state);
    });
  }

  /** What a file must keep to go on. */
  state(): Waiting {
    return {
      last: this.#last.slice(),
      gap: this.#gap.slice(),
      values: this.#waiting.map((row) => row.slice()),
      isExcluded: this.#isExcluded.slice(),
      watches: this.#watches.map((watch) => watch.state()),
    };
  }

  /** Takes all it holds along, or brings it back. */
  carry(carrier: Carrier): void {
    for (const list of [this.offsets, this.#last, this.#gap]) carrier.fill(list);
    this.#waiting = this.#waiting.map((row) => carrier.list(row));
    this.#isExcluded = carrier.flags(this.#isExcluded);
    for (const watch of this.#watches) {
      const state = watch.state();
      carrier.fill(state);
      watch.restore(state);
    }
  }

  /** Ticks without any reading. */
  skip(ticks: number): void {
    if (ticks <= 0) return;
    const { longGapTicks } = this.#shape;
    const blank = Math.min(ticks, longGapTicks * ABSENT_GAPS + this.#isExcluded.length + 2);
    this.#add(
      this.#waiting.map(() => new Float64Array(blank).fill(Number.NaN)),
      new Uint8Array(blank),
    );
    const rest = ticks - blank;
    if (rest === 0) return;
    // Everything that waited is settled: all that is left is time that passes.
    this.#book.close();
    this.#book.pass(rest);
    for (let c = 0; c < this.#gap.length; c++) this.#gap[c] += rest;
  }

  /** A chunk, in the channels' units. */
  take(series: Series): void {
    const isExcluded = series.excluded?.isExcluded ?? new Uint8Array(series.ticks);
    this.#add(series.values, isExcluded);
  }

  #add(values: readonly Float64Array[], isExcluded: Uint8Array): void {
    const held = this.#isExcluded.length;
    const ticks = held + isExcluded.length;
    if (isExcluded.length === 0) return;
    const { raw, complete, status, aboutOffsets } = this.#roomFor(ticks);
    const excluded = new Uint8Array(ticks);
    excluded.set(this.#isExcluded);
    excluded.set(isExcluded, held);
    let settled = ticks - 1;
    for (let c = 0; c < raw.length; c++) {
      const row = raw[c];
      row.set(this.#waiting[c]);
      row.set(values[c], held);
      // Wild readings go where their next is there: from the newest of before on.
      this.#watches[c]?.passOver(row, Math.max(0, held - 1), ticks - 1);
      complete[c].set(row);
      status[c].fill(HERE);
      settled = Math.min(settled, this.#bridge(complete[c], status[c], c, ticks - 1));
    }
    this.#hand(complete, status, excluded, settled, aboutOffsets);
    for (let c = 0; c < raw.length; c++) this.#remember(c, complete[c], status[c], settled);
    this.#waiting = raw.map((row) => row.slice(settled));
    this.#isExcluded = excluded.slice(settled);
  }

  /** Room for so many ticks, used again from chunk to chunk; whatever was there before is there still. */
  #roomFor(ticks: number): Room {
    let room = this.#room;
    if (room === null || room.raw[0].length < ticks) {
      const rows = () => this.#waiting.map(() => new Float64Array(ticks));
      const status = this.#waiting.map(() => new Uint8Array(ticks));
      room = { raw: rows(), complete: rows(), aboutOffsets: rows(), status };
      // A window comes once, and its room would only take memory.
      this.#room = ticks <= MOST_KEPT ? room : null;
    }
    const { raw, complete, aboutOffsets, status } = room;
    const part = (row: Float64Array) => row.subarray(0, ticks);
    return {
      raw: raw.map(part),
      complete: complete.map(part),
      aboutOffsets: aboutOffsets.map(part),
      status: status.map((row) => row.subarray(0, ticks)),
    };
  }

  /** Completes a channel up to `end` and says from where on it must wait. */
  #bridge(row: Float64Array, status: Uint8Array, c: number, end: number): number {
    const { longGapTicks, signalCount } = this.#shape;
    const isSignal = c < signalCount;
    for (let t = 0; t < end; t++) {
      if (Number.isFinite(row[t])) continue;
      const from = t;
      while (t < end && !Number.isFinite(row[t])) t++;
      const before = from === 0 ? this.#gap[c] : 0;
      const left = from === 0 ? this.#last[c] : row[from - 1];
      const length = before + t - from;
      const isKnown = !Number.isNaN(left);
      if (length < longGapTicks && isKnown) {
        if (t === end) return from;
        for (let k = from; k < t; k++) row[k] = left + ((k - from + 1) / (t - from + 1)) * (row[t] - left);
        continue;
      }
      for (let k = from; k < t; k++) {
        row[k] = isKnown ? left : 0;
        const age = before + k - from;
        const isAway = isSignal ? age >= ABSENT_GAPS * longGapTicks : !isKnown;
        status[k] = isAway ? ABSENT : isSignal ? GONE : HELD;
      }
    }
    return end;
  }

  /** Hands settled ticks to the books, stretch by stretch; `u` is room for what they get. */
  #hand(
    values: readonly Float64Array[],
    status: readonly Uint8Array[],
    excluded: Uint8Array,
    end: number,
    u: readonly Float64Array[],
  ): void {
    const isWhole = status.map((row) => !row.includes(GONE) && !row.includes(ABSENT));
    for (let c = 0; c < u.length; c++) this.#aboutOffset(c, values[c], status[c], isWhole[c], end, u[c]);
    const isOne = !excluded.includes(1) && isWhole.every(Boolean);
    for (let t = 0; t < end; ) {
      let to = isOne ? end : t + 1;
      while (to < end && excluded[to] === excluded[t] && status.every((row) => row[to] === row[t])) to++;
      if (excluded[t] === 1 || this.#isDead(status, t)) {
        this.#book.close();
        this.#book.pass(to - t);
      } else {
        this.#book.open(Uint8Array.from(status, (row) => (isHere(row[t]) ? 1 : 0)));
        this.#book.take(u, t, to);
      }
      t = to;
    }
  }

  #isDead(status: readonly Uint8Array[], t: number): boolean {
    let away = 0;
    for (let c = 0; c < this.#shape.signalCount; c++) {
      if (status[c][t] === GONE) return true;
      if (status[c][t] === ABSENT) away++;
    }
    return away === this.#shape.signalCount;
  }

  #aboutOffset(
    c: number,
    row: Float64Array,
    status: Uint8Array,
    isWhole: boolean,
    end: number,
    out: Float64Array,
  ): void {
    if (Number.isNaN(this.offsets[c])) {
      const first = status.subarray(0, end).findIndex(isHere);
      if (first >= 0) this.offsets[c] = row[first];
    }
    const offset = this.offsets[c];
    if (isWhole) for (let t = 0; t < end; t++) out[t] = row[t] - offset;
    else for (let t = 0; t < end; t++) out[t] = isHere(status[t]) ? row[t] - offset : 0;
  }

  #remember(c: number, row: Float64Array, status: Uint8Array, end: number): void {
    if (end === 0) return;
    let from = end;
    while (from > 0 && status[from - 1] !== HERE) from--;
    this.#gap[c] = from === end ? 0 : (from === 0 ? this.#gap[c] : 0) + end - from;
    if (from > 0) this.#last[c] = row[from - 1];
  }
}

function isHere(status: number): boolean {
  return status === HERE || status === HELD;
}
