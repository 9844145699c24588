/**
 * The gateway's memory on disk: the journal of the open segment, the checkpoint it starts from, and the spool of closed
 * segments. A boundary writes the closed segment, then the next journal file with the readings of ticks still open, then
 * the checkpoint; the checkpoint's replacement decides. A segment may be sent only after it, so that no number ever stands
 * for two contents.
 *
 * A disk that fails (full, read-only, worn) never stops the forecasts: segments are held in memory, a few of them, and the
 * whole boundary is tried again. A file that failed to sync is never trusted again.
 */
import { MAX_INDEX, MAX_SEGMENT_BYTES, PLAIN_SEGMENT_FORMAT, SegmentWriter } from '@stillwell/protocol';
import type { Model } from '@stillwell/runtime/filter';
import { type Disk, replaceOn, sweepParts } from '../disk.ts';
import type { LateChange, OpenReadings } from '../ingest/align.ts';
import type { ResolutionBudget } from './budget.ts';
import { type Checkpoint, encodeCheckpoint } from './checkpoint.ts';
import { type JournalCounts, NOTHING_COUNTED } from './journal-counts.ts';
import { checkpointPath, journalFolder, journalPath } from './journal-files.ts';
import type { Recorded } from './recorded.ts';
import type { Spool } from './spool.ts';
import { startWal, Wal } from './wal.ts';

/** What a journal is made of. */
export interface JournalOptions {
  readonly disk: Disk;
  /** The data folder. */
  readonly folder: string;
  readonly site: string;
  readonly gateway: string;
  /** 8 random bytes. */
  readonly stream: Uint8Array;
  readonly spool: Spool;
  readonly budget: ResolutionBudget;
  /** Ticks after which a segment closes. */
  readonly segmentTicks: number;
  /** Ticks whose journal files are kept to warm new bundles with. */
  readonly keepTicks: number;
  /** Signals and inputs of the site. */
  readonly channelCount: number;
  /** The readings of ticks not closed yet. */
  readonly openReadings: () => OpenReadings;
}

/** A journal file whose ticks are in a segment. */
export interface KeptJournal {
  readonly number: number;
  readonly ticks: number;
  readonly bytes: number;
}

/** Where a journal goes on. */
export interface JournalPosition {
  readonly number: number;
  readonly sinceKeyed: number;
}

/** A segment closes by size well before the most that one may hold … */
const SEGMENT_BYTES = 96 * 1024;
/** … and sooner where a start in full takes much of it. Bytes kept free for head and rounding up … */
const SPARE_BYTES = 16 * 1024;
/** … and for each late reading. */
const CORRECTION_BYTES = 12;
const MOST_CORRECTIONS = 8192;
/** A flood of readings closes the segment early, so that a restart need not read too much … */
const JOURNAL_BYTES = 8 * 1024 * 1024;
/** … and older files go once they hold more than this. */
const KEPT_BYTES = 64 * 1024 * 1024;
/** A self-contained start costs as much as a few segments: one a week of hourly segments … */
const KEYED_EVERY = 168;
/** … and one a day while nobody takes them, since then the oldest may have to go. */
const KEYED_EVERY_WAITING = 24;
const HELD_IN_MEMORY = 8;
/** Of a segment, about, without start and readings. */
const HEAD_BYTES = 110;

/** See the file head. */
export class Journal {
  readonly #options: JournalOptions;
  readonly #streamName: string;
  readonly #counts: { -readonly [Count in keyof JournalCounts]: number };
  /** Journal files that still hold wanted ticks, oldest first. */
  readonly #kept: KeptJournal[] = [];
  #unsaved: { number: number; bytes: Uint8Array }[] = [];
  #number: number;
  #sinceKeyed: number;
  #startState: Uint8Array = new Uint8Array(0);
  #writer: SegmentWriter | null = null;
  #corrections = 0;
  #mustKey = false;
  #wal: Wal | null = null;
  #fault: string | null = null;

  /** counts  of the journal before this one in the same run, counted on */
  constructor(options: JournalOptions, position: JournalPosition, counts: JournalCounts = NOTHING_COUNTED) {
    this.#options = options;
    this.#counts = { ...counts };
    this.#streamName = Buffer.from(options.stream).toString('hex');
    this.#number = position.number;
    this.#sinceKeyed = position.sinceKeyed;
    options.disk.makeFolder(journalFolder(options.folder));
    for (const folder of [options.folder, journalFolder(options.folder)]) sweepParts(options.disk, folder);
  }

  get counts(): JournalCounts {
    return this.#counts;
  }

  /** Number of the open segment; smaller ones may be sent. */
  get number(): number {
    return this.#number;
  }

  /** The filter's state where the open segment starts. */
  get startState(): Uint8Array {
    return this.#startState;
  }

  get ticks(): number {
    return this.#writer?.ticks ?? 0;
  }

  /** Why nothing is being kept at present; null when all is well. */
  get fault(): string | null {
    return this.#fault;
  }

  /** Whether the open segment should close now. */
  get isDue(): boolean {
    const writer = this.#writer;
    if (writer === null) return false;
    const { ticks, bytesSoFar, isFull } = writer;
    if (ticks >= this.#options.segmentTicks || bytesSoFar >= this.#mostBytes() || isFull) return true;
    return this.#corrections >= MOST_CORRECTIONS || (this.#wal?.bytes ?? 0) >= JOURNAL_BYTES;
  }

  /**
   * Goes on with the segment a checkpoint started; the caller replays its journal by `coded` and `changed`.
   *
   * keepBytes  of the journal file, as far as it checks; 0: it is gone
   */
  resume(startState: Uint8Array, keepBytes: number, kept: readonly KeptJournal[]): void {
    this.startFrom(startState);
    this.#kept.push(...kept);
    this.#guard(() => this.#openWal(keepBytes));
  }

  /** The same without a file: for what is replayed and closed at once. */
  startFrom(startState: Uint8Array): void {
    this.#startState = startState;
  }

  /** Starts the first segment of this journal, with the state in full. */
  begin(recorded: Recorded): void {
    this.#sinceKeyed = 0;
    this.#startState = recorded.savedState();
    recorded.coarsen(this.#options.budget.coarseness);
    this.#persist(recorded);
  }

  /** Writes a reading down that was placed. */
  reading(channel: number, timeMs: number, value: number): void {
    this.#guard(() => this.#wal?.reading(channel, timeMs, value));
  }

  /** Writes the tick down. */
  tick(tick: number, values: Float64Array): void {
    this.#guard(() => this.#wal?.tick(tick, values));
  }

  /** Codes the tick that `recorded` has just folded in. */
  coded(recorded: Recorded): void {
    this.#writer ??= this.#openWriter(recorded, recorded.tick);
    this.#writer.push(recorded.lattice, recorded.predicted, recorded.raw);
  }

  /** Writes a late change down and codes it. */
  change(change: LateChange, latticeIndex: number, recorded: Recorded): void {
    this.#guard(() => this.#wal?.change(change));
    this.changed(change, latticeIndex, recorded);
  }

  /** Codes a late change. */
  changed(change: LateChange, latticeIndex: number, recorded: Recorded): void {
    if (recorded.tick < 0 || !(Math.abs(latticeIndex) <= MAX_INDEX)) return;
    this.#writer ??= this.#openWriter(recorded, recorded.tick + 1);
    this.#writer.correct(change.tick, change.channel, latticeIndex);
    this.#corrections++;
  }

  /** Closes the segment in `before`'s state and opens the next in `after`'s, the same one or another bundle's. */
  turnOver(before: Recorded, after: Recorded): void {
    const hasClosed = this.#finish(before, after);
    after.coarsen(this.#options.budget.coarseness);
    const isBroken = this.#options.spool.takeBreak() || this.#mustKey;
    if (before !== after || isBroken || (hasClosed && this.#isKeyDue())) this.#sinceKeyed = 0;
    else if (hasClosed) this.#sinceKeyed++;
    this.#mustKey = false;
    this.#startState = after.savedState();
    this.#persist(after);
  }

  /** Makes durable what was written down so far, off the main thread. Never rejects: see `fault`. */
  async syncSoon(): Promise<void> {
    const wal = this.#wal;
    try {
      await wal?.syncSoon();
    } catch (error) {
      // A file that was left meanwhile has its ticks in a segment and its open readings in the next file.
      if (wal === this.#wal) this.#fail(error);
    }
  }

  /** Hands what was written down to the system; cheap, and survives the process though not the power. */
  flush(): void {
    this.#guard(() => this.#wal?.flush());
  }

  /** Whether anything waits for a sync. */
  get isDirty(): boolean {
    return this.#wal?.isDirty ?? false;
  }

  /** Whether all that was written down is on disk; true as well where the disk takes nothing, see `fault`. */
  get isDurable(): boolean {
    return this.#wal?.isDurable ?? true;
  }

  /** Closes the open segment for a journal of another stream to follow; returns the counts to count on. */
  leave(recorded: Recorded): JournalCounts {
    this.turnOver(recorded, recorded);
    this.stop();
    return { ...this.#counts, lost: this.#counts.lost + this.#unsaved.length };
  }

  /** Clean stop. */
  stop(): void {
    this.#guard(() => this.#wal?.sync());
    this.#closeWal();
  }

  /** Coded bytes after which the open segment closes. */
  #mostBytes(): number {
    const start = this.#sinceKeyed === 0 ? this.#startState.length : 0;
    const free = MAX_SEGMENT_BYTES - SPARE_BYTES - start - CORRECTION_BYTES * this.#corrections;
    return Math.min(SEGMENT_BYTES, free);
  }

  #openWriter(recorded: Recorded, firstTick: number): SegmentWriter {
    const { site, gateway, stream } = this.#options;
    return new SegmentWriter({
      site,
      gateway,
      stream,
      number: this.#number,
      bundle: recorded.digest,
      firstTick,
      channelCount: recorded.channelCount,
      signalCount: recorded.signalCount,
      residualScaleSteps: recorded.residualScaleSteps(),
      startState: this.#startState,
      keyed: this.#sinceKeyed === 0,
      ...(recorded.raw === null ? { coarseness: this.#options.budget.coarseness } : { format: PLAIN_SEGMENT_FORMAT }),
    });
  }

  /** Whether there was a segment to close. */
  #finish(recorded: Recorded, after: Recorded): boolean {
    const writer = this.#writer;
    this.#writer = null;
    this.#corrections = 0;
    if (writer === null) return false;
    this.#kept.push({ number: this.#number, ticks: writer.ticks, bytes: this.#wal?.bytes ?? 0 });
    this.#counts.closed++;
    try {
      const bytes = writer.finish(recorded.savedState());
      this.#unsaved.push({ number: this.#number, bytes });
      if (recorded.model !== null && after.model !== null) this.#account(writer, bytes.length, after.model);
    } catch {
      // Larger than a segment may be, which closing by size prevents; the next one must then stand alone.
      this.#lose();
    }
    this.#number++;
    if (this.#unsaved.length > HELD_IN_MEMORY) {
      this.#unsaved.shift();
      this.#lose();
    }
    return true;
  }

  #account(writer: SegmentWriter, bytes: number, model: Model): void {
    const { budget, spool, segmentTicks } = this.#options;
    const startBytes = this.#sinceKeyed === 0 ? Math.max(0, bytes - writer.bytesSoFar - HEAD_BYTES) : 0;
    const ticksBetweenStarts = segmentTicks * (this.#isWaiting ? KEYED_EVERY_WAITING : KEYED_EVERY);
    const segment = { bytes, startBytes, ticks: writer.ticks, residualSteps: writer.residualSteps() };
    budget.closed({ ...segment, ticksBetweenStarts, waitingBytes: spool.bytes }, model);
  }

  /** Whether nobody has taken segments for long. */
  get #isWaiting(): boolean {
    return this.#options.spool.waiting.length >= KEYED_EVERY_WAITING;
  }

  #lose(): void {
    this.#counts.lost++;
    this.#mustKey = true;
  }

  #isKeyDue(): boolean {
    const next = this.#sinceKeyed + 1;
    return next >= KEYED_EVERY || (next >= KEYED_EVERY_WAITING && this.#isWaiting);
  }

  #persist(recorded: Recorded): void {
    const { disk, folder, spool, stream, budget } = this.#options;
    if (this.#fault === null) this.#guard(() => this.#wal?.sync());
    this.#closeWal();
    this.#fault = null;
    this.#guard(() => {
      for (const { number, bytes } of this.#unsaved) spool.put(this.#streamName, number, bytes);
      const checkpoint: Checkpoint = {
        stream,
        number: this.#number,
        sinceKeyed: this.#sinceKeyed,
        bundle: recorded.digest,
        state: this.#startState,
        bounds: recorded.savedBounds(),
        budget: budget.state,
      };
      // Before the checkpoint that names it, so that open readings are in the old file or the new at every moment.
      this.#openWal(0);
      replaceOn(disk, checkpointPath(folder), encodeCheckpoint(checkpoint));
      this.#unsaved = [];
      this.#prune();
      this.#shed();
    });
  }

  #shed(): void {
    const shed = this.#options.spool.shed();
    this.#counts.shedSegments += shed.segments;
    this.#counts.shedBytes += shed.bytes;
    this.#counts.shedTicks += shed.ticks;
  }

  #openWal(keepBytes: number): void {
    const { disk, folder, stream, channelCount, openReadings } = this.#options;
    const head = { channelCount, stream, number: this.#number };
    const path = journalPath(folder, this.#number);
    this.#wal = new Wal(disk, path, keepBytes > 0 ? keepBytes : startWal(disk, path, head, openReadings()));
  }

  /** Removes journal files whose ticks are in segments and no longer wanted for warming. */
  #prune(): void {
    const { disk, folder, keepTicks } = this.#options;
    let ticks = 0;
    let bytes = 0;
    let from = this.#kept.length;
    while (from > 0 && ticks < keepTicks && bytes < KEPT_BYTES) {
      const { ticks: more, bytes: larger } = this.#kept[--from]!;
      ticks += more;
      bytes += larger;
    }
    for (const { number } of this.#kept.splice(0, from)) disk.remove(journalPath(folder, number));
  }

  #closeWal(): void {
    const wal = this.#wal;
    this.#wal = null;
    if (wal) this.#guard(() => wal.close());
  }

  /** Disk errors are kept, never thrown: forecasts go on without a record. */
  #guard(work: () => void): void {
    try {
      work();
    } catch (error) {
      this.#fail(error);
    }
  }

  #fail(error: unknown): void {
    this.#fault ??= error instanceof Error ? error.message : String(error);
    const wal = this.#wal;
    this.#wal = null;
    try {
      wal?.close();
    } catch {
      // Already failed; there is nothing more to lose with this file.
    }
  }
}
