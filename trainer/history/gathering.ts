/**
 * Where the file readers put what they find: one block a wide file, whose channels share their times, and one block a
 * channel for long files.
 */
import { GrowingList } from './growing.ts';
import type { ChannelReadings } from './history.ts';

/** Readings of some channels at shared times; `values[c]` null where the block holds nothing of channel c. */
export interface Block {
  readonly times: GrowingList;
  readonly values: readonly (GrowingList | null)[];
  /** Where each reading stands in its file, counted from 1; null where nobody asks. */
  readonly lines: GrowingList | null;
}

/** What to keep: half-open span of time. */
export interface Span {
  readonly fromMs: number;
  readonly untilMs: number;
}

/** All readings of one history while its files are read. */
export class Gathering {
  readonly channelCount: number;
  readonly span: Span;
  readonly #blocks: Block[] = [];
  readonly #long: (Block | null)[];
  /** Time of the reading before, by channel of long files; of the row before in wide files. */
  readonly previousMs: Float64Array;
  previousRowMs = Number.NEGATIVE_INFINITY;

  readonly #withLines: boolean;

  constructor(channelCount: number, span: Span, withLines = false) {
    this.#withLines = withLines;
    this.channelCount = channelCount;
    this.span = span;
    this.#long = new Array<Block | null>(channelCount).fill(null);
    this.previousMs = new Float64Array(channelCount).fill(Number.NEGATIVE_INFINITY);
  }

  /** Times of the last readings, for a file that follows: it may begin inside a doubled hour. */
  carryTo(next: Gathering): void {
    next.previousRowMs = this.previousRowMs;
    next.previousMs.set(this.previousMs);
  }

  /** A block for the channels of one wide file. */
  wideBlock(channels: readonly number[]): Block {
    const values = Array.from({ length: this.channelCount }, (_, c) =>
      channels.includes(c) ? new GrowingList() : null,
    );
    const block = { times: new GrowingList(), values, lines: this.#withLines ? new GrowingList() : null };
    this.#blocks.push(block);
    return block;
  }

  /** The block of just these channels: that of the wide file, else of the one channel of a long one, made where it is new. */
  blockFor(channels: readonly number[]): Block {
    const key = channels.join(' ');
    const known = this.#blocks.find(
      (one) => one.values.flatMap((list, c) => (list === null ? [] : [c])).join(' ') === key,
    );
    return known ?? this.#longBlock(channels[0] as number);
  }

  #longBlock(channel: number): Block {
    const block = this.#long[channel] ?? this.wideBlock([channel]);
    this.#long[channel] = block;
    return block;
  }

  /** Adds one reading of a long file. */
  add(channel: number, timeMs: number, value: number, line: number): void {
    if (timeMs < this.span.fromMs || timeMs >= this.span.untilMs) return;
    const block = this.#longBlock(channel);
    block.times.push(timeMs);
    block.values[channel]?.push(value);
    block.lines?.push(line);
  }

  /** What was gathered so far; a streaming reader takes it away and clears the lists, which the readers then fill again. */
  get blocks(): readonly Block[] {
    return this.#blocks;
  }

  /** True where some file holds the channel. */
  holds(channel: number): boolean {
    return this.#blocks.some((block) => block.values[channel] != null);
  }

  /** All readings by channel; channels found in the same blocks share one array of times. */
  channels(names: readonly string[]): ChannelReadings[] {
    const shared = new Map<string, Float64Array>();
    return names.map((name, c) => {
      const mine = this.#blocks.map((_, b) => b).filter((b) => this.#blocks[b]?.values[c]);
      const key = mine.join(' ');
      let times = shared.get(key);
      if (!times) {
        times = join(mine.map((b) => (this.#blocks[b] as Block).times));
        shared.set(key, times);
      }
      return { name, times, values: join(mine.map((b) => (this.#blocks[b] as Block).values[c] as GrowingList)) };
    });
  }
}

function join(lists: readonly GrowingList[]): Float64Array {
  if (lists.length === 1) return (lists[0] as GrowingList).take();
  const joined = new Float64Array(lists.reduce((sum, list) => sum + list.length, 0));
  let at = 0;
  for (const list of lists) {
    joined.set(list.take(), at);
    at += list.length;
  }
  return joined;
}
