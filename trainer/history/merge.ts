/**
 * Several files of a long history side by side, in order of time: a file is opened when its first time comes, and of the
 * open ones the one that lies furthest back is read on. So files may be given in any order, overlap, or hold one signal
 * each, and only a few thousand rows of each open one are in memory.
 */
import { TrainError } from '../errors.ts';
import { iso, lengthOf } from './finding.ts';
import type { Block, Gathering } from './gathering.ts';
import type { GrowingList } from './growing.ts';
import type { FileRead } from './history.ts';
import type { ReadingStream } from './reading-stream.ts';
import type { RecentReadings } from './recent.ts';

/** A file not yet opened. */
export interface WaitingFile {
  readonly path: string;
  /** Its first time, ms; Infinity where it holds none that counts. */
  readonly firstMs: number;
}

/** An open file. */
export interface OpenFile {
  readonly stream: ReadingStream;
  /** Rows of each block that were taken away already, and the time before them. */
  readonly taken: Map<Block, { count: number; lastMs: number }>;
}

/** A reading that comes too late to be put where it belongs; `stream` tells whose. */
export class LateReading extends TrainError {
  readonly path: string;

  constructor(path: string, line: number, timeMs: number, newestMs: number, windowMs: number) {
    super(
      'history',
      `${path}:${line}: expected times in order, or at most ${lengthOf(windowMs)} behind the newest (${iso(newestMs)}), got ${iso(timeMs)}; a history of this length is read as it comes: sort the rows of this file by time`,
      { details: { file: path, line } },
    );
    this.path = path;
  }
}

/** Reads files side by side. */
export class StreamMerge {
  readonly #open: (path: string, previous: Gathering | null) => ReadingStream;
  readonly #slackMs: number;
  readonly waiting: WaitingFile[];
  readonly active: OpenFile[] = [];
  readonly finished: FileRead[] = [];
  /** Lists of the file that ended last: the next one may begin inside a doubled hour. */
  last: Gathering | null = null;
  /** Rows earlier than the row before them in their file. */
  outOfOrder = 0;

  /**
   * waiting  in order of their first times
   * slackMs  a file may be read so far ahead of the others: less switching to and fro
   */
  constructor(
    waiting: readonly WaitingFile[],
    slackMs: number,
    open: (path: string, previous: Gathering | null) => ReadingStream,
  ) {
    this.waiting = [...waiting];
    this.#slackMs = slackMs;
    this.#open = open;
  }

  /** Rows and stored bytes of open and finished files. */
  get rows(): number {
    return sum(this.finished, ({ rows }) => rows) + sum(this.active, ({ stream }) => stream.rows);
  }
  get bytes(): number {
    return sum(this.finished, ({ bytes }) => bytes) + sum(this.active, ({ stream }) => stream.bytesDone);
  }

  /**
   * Moves some readings on; false where all files are through.
   *
   * throws  LateReading; what the files refuse
   */
  async step(recent: RecentReadings): Promise<boolean> {
    await this.#fill();
    const next = this.#furthestBack();
    if (next === null) {
      if (this.waiting.length === 0) return false;
      this.#openNext();
      return true;
    }
    const head = headOf(next);
    const coming = this.waiting[0]?.firstMs ?? Number.POSITIVE_INFINITY;
    if (coming <= head) {
      this.#openNext();
      return true;
    }
    // The signals of a long file are lists of their own, which must not run away from each other either.
    const isParted = next.stream.gathering.blocks.length > 1;
    const others = this.active.filter((one) => one !== next || isParted).map(headOf);
    this.#move(next, Math.min(coming, ...others) + this.#slackMs, recent);
    return true;
  }

  async close(): Promise<void> {
    for (const { stream } of this.active) await stream.close();
  }

  #openNext(): void {
    const { path } = this.waiting.shift() as WaitingFile;
    this.active.push({ stream: this.#open(path, this.last), taken: new Map() });
  }

  /** Every open file has readings at hand; those that ended are put away. */
  async #fill(): Promise<void> {
    for (let at = 0; at < this.active.length; ) {
      const file = this.active[at] as OpenFile;
      if (headOf(file) < Number.POSITIVE_INFINITY) {
        at++;
        continue;
      }
      clear(file);
      if (await file.stream.more()) continue;
      if (headOf(file) < Number.POSITIVE_INFINITY) continue;
      this.finished.push(file.stream.account);
      this.last = file.stream.gathering;
      this.active.splice(at, 1);
    }
  }

  #furthestBack(): OpenFile | null {
    let found: OpenFile | null = null;
    for (const file of this.active) if (found === null || headOf(file) < headOf(found)) found = file;
    return found;
  }

  /** Moves a file's rows up to a time; a row that lies back in time goes with the one before it. */
  #move({ stream, taken }: OpenFile, limitMs: number, recent: RecentReadings): void {
    for (const block of stream.gathering.blocks) {
      const mark = taken.get(block) ?? { count: 0, lastMs: Number.NEGATIVE_INFINITY };
      const times = block.times.view(mark.count);
      let count = 0;
      for (; count < times.length && (times[count] as number) <= limitMs; count++) {
        if ((times[count] as number) < mark.lastMs) this.outOfOrder++;
        mark.lastMs = times[count] as number;
      }
      if (count === 0) continue;
      const channels = block.values.flatMap((list, c) => (list === null ? [] : [c]));
      const columns = channels.map((c) => (block.values[c] as GrowingList).view(mark.count, mark.count + count));
      const late = recent.append(channels, times.subarray(0, count), columns);
      if (late >= 0) {
        const line = block.lines?.view()[mark.count + late] ?? 0;
        throw new LateReading(stream.path, line, times[late] as number, recent.newestMs, recent.windowMs);
      }
      taken.set(block, { count: mark.count + count, lastMs: mark.lastMs });
    }
  }
}

/** Earliest of the next readings of an open file; Infinity where none is at hand. */
function headOf({ stream, taken }: OpenFile): number {
  let head = Number.POSITIVE_INFINITY;
  for (const block of stream.gathering.blocks) {
    const at = taken.get(block)?.count ?? 0;
    if (at < block.times.length) head = Math.min(head, block.times.view(at, at + 1)[0] as number);
  }
  return head;
}

/** Empties lists that were taken away whole. */
function clear({ stream, taken }: OpenFile): void {
  for (const block of stream.gathering.blocks) {
    for (const list of [block.times, block.lines, ...block.values]) if (list !== null) list.length = 0;
    const mark = taken.get(block);
    if (mark !== undefined) mark.count = 0;
  }
}

function sum<T>(all: readonly T[], of: (one: T) => number): number {
  return all.reduce((total, one) => total + of(one), 0);
}
