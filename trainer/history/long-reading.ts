/** One reading of a long history from its files: begun anew or from a saved place, gone through, saved now and then. */
import type { Site } from '@stillwell/protocol';
import { ColumnStream } from './column-stream.ts';
import type { ColumnsEngine } from './columns-engine.ts';
import { firstTimeOf } from './first-time.ts';
import { Gathering, type Span } from './gathering.ts';
import { type InputFile, inspectFile } from './input-file.ts';
import { type Interrupt, Interrupted, type SignalWatch, watchSignals } from './interrupt.ts';
import type { LongOptions } from './long.ts';
import { placeOf, takeOut } from './long-place.ts';
import { StreamMerge } from './merge.ts';
import { type OlderSink, OlderTicks } from './older.ts';
import { refuseUnseen } from './read.ts';
import type { ReadingStream, StreamState } from './reading-stream.ts';
import { type LongLimits, RecentReadings } from './recent.ts';
import { type Belongs, type Place, savePlace } from './saved-place.ts';
import { TextStream } from './text-stream.ts';
import { checkStretch } from './ticks.ts';
import { TimeReader } from './times.ts';

/** Options of one reading. */
export interface ReadingSettings extends LongOptions {
  readonly limits: LongLimits;
  /** Parquet files whose rows are to be sorted by time. */
  readonly toSort: ReadonlySet<string>;
  /** What a saved place belongs to; null where none is kept. */
  readonly belongs: Belongs | null;
}

/** A place is as large as what is learned so far: it is saved this seldom, and so seldom that it costs a twentieth of the time. */
const SAVE_EVERY_MS = 30_000;
const SAVE_SHARE = 20;
const NEVER: SignalWatch = { isAsked: false, kept: () => {}, end: () => {} };

/** Holds the parts while they are filled. */
export class LongReading {
  readonly #site: Site;
  readonly #settings: ReadingSettings;
  readonly #sink: OlderSink;
  readonly #engine: ColumnsEngine;
  readonly #files: ReadonlyMap<string, InputFile>;
  readonly #zone: string | null;
  readonly #span: Span;
  readonly times: TimeReader;
  readonly merge: StreamMerge;
  readonly recent: RecentReadings;
  readonly older: OlderTicks;

  constructor(paths: readonly string[], site: Site, settings: ReadingSettings, sink: OlderSink, engine: ColumnsEngine) {
    this.#site = site;
    this.#settings = settings;
    this.#sink = sink;
    this.#engine = engine;
    this.#files = new Map(paths.map((path) => [path, inspectFile(path)]));
    this.#zone = settings.zone ?? (settings.requireZone ? null : site.timeZone);
    this.#span = {
      fromMs: settings.fromMs ?? Number.NEGATIVE_INFINITY,
      untilMs: settings.untilMs ?? Number.POSITIVE_INFINITY,
    };
    this.times = new TimeReader(this.#zone);
    this.recent = new RecentReadings(site.tickMs, settings.limits);
    this.older = new OlderTicks(site, sink);
    const slackMs = (settings.limits.chunkTicks / 4) * site.tickMs;
    this.merge = new StreamMerge([], slackMs, (path, previous) => this.#open(path, null, previous));
  }

  /** True for a file that could be sorted and was not. */
  canSort(path: string): boolean {
    return this.#files.get(path)?.kind === 'Parquet' && !this.#settings.toSort.has(path);
  }

  /** Begins, anew or from a place. */
  async begin(place: Place | null): Promise<void> {
    if (place !== null) {
      await takeOut(place, this, this.#sink, (path, state) => this.#open(path, state, null));
      this.#settings.say?.(`Going on from where reading was interrupted, after ${this.merge.rows} rows.`);
      return;
    }
    const waiting: { path: string; firstMs: number }[] = [];
    for (const [path, file] of this.#files) waiting.push({ path, firstMs: await this.#firstTime(path, file) });
    // Files whose first times are equal keep the order they were given in.
    this.merge.waiting.push(...waiting.sort((a, b) => order(a.firstMs, b.firstMs)));
  }

  /**
   * Reads through.
   *
   * throws  Interrupted once the place is saved; LateReading; what the files refuse
   */
  async through(): Promise<void> {
    const { belongs, interrupt } = this.#settings;
    const own = belongs === null || interrupt !== undefined ? NEVER : watchSignals();
    try {
      await this.#readAll(interrupt ?? own);
      own.end();
    } catch (cause) {
      // On the way out after an interrupt no further signal may kill before the person is told where things stand.
      if (cause instanceof Interrupted) own.kept();
      else own.end();
      throw cause;
    } finally {
      this.#settings.progress?.end();
    }
    const { firstTick, endTick } = this.recent;
    const names = this.merge.finished.map(({ file }) => file).join(', ');
    checkStretch(names, this.merge.rows, firstTick, endTick - firstTick, this.#site.tickMs);
    refuseUnseen(this.#site, (c) => this.recent.holds(c), this.merge.finished);
    await this.older.handOn(this.recent, true);
    this.#sink.end?.();
  }

  async #readAll(interrupt: Interrupt): Promise<void> {
    const { saveEveryMs = SAVE_EVERY_MS } = this.#settings;
    let savedMs = performance.now();
    let waitMs = saveEveryMs;
    let isSaved = false;
    let hasMore = true;
    for (let steps = 0; hasMore; steps++) {
      hasMore = await this.merge.step(this.recent);
      if (hasMore) await this.older.handOn(this.recent, false);
      this.#tell();
      // Where all had been read before, there is nothing to stop.
      if (interrupt.isAsked && (hasMore || steps > 0)) {
        await this.#save();
        throw new Interrupted();
      }
      // What took long to read is kept until the result is written.
      if (hasMore ? performance.now() - savedMs < waitMs : !isSaved) continue;
      const fromMs = performance.now();
      await this.#save();
      savedMs = performance.now();
      if (saveEveryMs > 0) waitMs = Math.max(saveEveryMs, SAVE_SHARE * (savedMs - fromMs));
      isSaved = true;
    }
  }

  async #save(): Promise<void> {
    const { belongs, resumeFile } = this.#settings;
    if (belongs !== null && resumeFile !== undefined) savePlace(resumeFile, belongs, await placeOf(this, this.#sink));
  }

  /** A file that will be sorted may hold earlier times than its first row has: it is opened at once. */
  async #firstTime(path: string, file: InputFile): Promise<number> {
    if (this.#settings.toSort.has(path)) return Number.MIN_SAFE_INTEGER;
    return firstTimeOf(file, this.#site, this.#zone, this.#engine);
  }

  async close(): Promise<void> {
    await this.merge.close();
  }

  #tell(): void {
    const { rows, bytes } = this.merge;
    let all = 0;
    for (const file of this.#files.values()) all += file.bytes;
    this.#settings.progress?.update(rows, bytes > 0 ? Math.round((rows * all) / bytes) : null);
  }

  #open(path: string, state: StreamState | null, previous: Gathering | null): ReadingStream {
    const file = this.#files.get(path) as InputFile;
    const times = new TimeReader(this.#zone, this.times);
    const from = { state, previous };
    if (file.kind !== 'Parquet') {
      const { blockBytes } = this.#settings.limits;
      return new TextStream(file, this.#site, this.#span, times, from, blockBytes);
    }
    const channels = this.#site.signals.length + this.#site.inputs.length;
    const gathering = new Gathering(channels, this.#span, true);
    return new ColumnStream(
      ...([file, this.#site, gathering, times, this.#engine, from, this.#settings.toSort.has(path)] as const),
    );
  }
}

function order(a: number, b: number): number {
  return a === b ? 0 : a - b;
}
