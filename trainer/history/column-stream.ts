/**
 * A Parquet file as a stream of readings: wide (a time and a column a signal) or long (time, signal, value), a few thousand
 * rows at a time. Missing values are missing readings; rows are counted from 1 where a refusal names one.
 */
import type { DuckDBConnection, DuckDBDataChunk } from '@duckdb/node-api';
import type { Site } from '@stillwell/protocol';
import { channelsOf } from './channels.ts';
import { type ColumnPlan, planColumns, rowsQuestion } from './column-plan.ts';
import { ask, type ColumnsEngine, chunksOf, isOutOfMemory, named, quotedPath } from './columns-engine.ts';
import { digestOfFile } from './file-digest.ts';
import { tally, timeRefusal } from './file-reader.ts';
import type { Block, Gathering } from './gathering.ts';
import type { GrowingList } from './growing.ts';
import type { FileRead } from './history.ts';
import type { InputFile } from './input-file.ts';
import type { ReadingStream, StreamStart, StreamState } from './reading-stream.ts';
import { refusal } from './refusal.ts';
import type { TimeReader, TimeState } from './times.ts';

/** Chunks taken at once: 2048 rows each. */
const CHUNKS = 4;
/** Rows asked for to learn why a stream ended. */
const PROBED = 16_384;
/** Names of signals that a refusal or a finding can use. */
const MOST_IGNORED = 1000;

interface ColumnState extends StreamState {
  readonly kind: 'columns';
  readonly row: number;
  /** Channels of a wide file; null in a long one. */
  readonly channels: readonly number[] | null;
  readonly missing: number;
  readonly times: TimeState;
  readonly previousRowMs: number;
  readonly isSorted: boolean;
}

/** Streams one Parquet file. */
export class ColumnStream implements ReadingStream {
  readonly path: string;
  readonly gathering: Gathering;
  readonly #file: InputFile;
  readonly #engine: ColumnsEngine;
  readonly #times: TimeReader;
  readonly #wanted: readonly string[];
  readonly #isSorted: boolean;
  readonly #missing: Record<string, number> = {};
  #connection: DuckDBConnection | null = null;
  #plan: ColumnPlan | null = null;
  #chunks: AsyncGenerator<DuckDBDataChunk> | null = null;
  #block: Block | null = null;
  #account: FileRead | null = null;
  /** Where an earlier run stood. */
  readonly #from: ColumnState | null;
  rows = 0;

  /** isSorted  the file's rows are first sorted by time */
  constructor(
    file: InputFile,
    site: Site,
    gathering: Gathering,
    times: TimeReader,
    engine: ColumnsEngine,
    from: StreamStart,
    isSorted = false,
  ) {
    this.path = file.path;
    this.gathering = gathering;
    this.#file = file;
    this.#engine = engine;
    this.#times = times;
    this.#wanted = channelsOf(site).map((channel) => channel.column);
    const state = from.state as ColumnState | null;
    this.#from = state;
    this.#isSorted = state?.isSorted ?? isSorted;
    if (state === null) {
      from.previous?.carryTo(gathering);
      return;
    }
    this.rows = state.row;
    if (state.channels !== null) this.#block = gathering.wideBlock(state.channels);
    if (state.missing > 0) this.#missing[''] = state.missing;
    times.restore(state.times);
    gathering.previousRowMs = state.previousRowMs;
  }

  get bytesDone(): number {
    const all = this.#plan?.rows ?? 0;
    return all > 0 ? Math.round((this.#file.bytes * this.rows) / all) : 0;
  }

  /** Share of a wide file's rows that was read; 1 in a long one, where one signal may follow another. */
  get share(): number {
    return this.#plan?.format === 'wide Parquet' ? this.rows / this.#plan.rows : 1;
  }

  get account(): FileRead {
    return this.#account as FileRead;
  }

  async more(): Promise<boolean> {
    if (this.#account !== null) return false;
    const plan = await this.#begin();
    for (let count = 0; count < CHUNKS; count++) {
      const next = await this.#next();
      if (next !== null) {
        this.#take(plan, next);
        continue;
      }
      if (this.rows < plan.rows) {
        await this.#askAgain(plan);
        continue;
      }
      if (count > 0) return true;
      await this.#end(plan);
      return false;
    }
    return true;
  }

  async close(): Promise<void> {
    await this.#chunks?.return(undefined);
    this.#connection?.closeSync();
    this.#connection = null;
  }

  state(): StreamState | null {
    if (this.#plan === null) return this.#from;
    const state: ColumnState = {
      ...{ kind: 'columns', row: this.rows, missing: this.#missing[''] ?? 0 },
      ...{ times: this.#times.state(), isSorted: this.#isSorted, previousRowMs: this.gathering.previousRowMs },
      channels: this.#plan.format === 'long Parquet' ? null : this.#plan.channels,
    };
    return this.rows > 0 ? state : null;
  }

  async #begin(): Promise<ColumnPlan> {
    if (this.#plan !== null) return this.#plan;
    this.#connection = await this.#engine.connect();
    if (this.#isSorted) await this.#engine.allowSpill(this.#connection);
    const plan = await planColumns(this.#connection, this.path, this.#wanted);
    if (plan.rows === 0)
      throw refusal({ file: this.path }, 'rows of readings', 'a file without rows', 'export the file again');
    if (plan.format === 'wide Parquet') this.#block ??= this.gathering.wideBlock(plan.channels);
    this.#plan = plan;
    this.#ask(plan);
    return plan;
  }

  #ask(plan: ColumnPlan): void {
    const question = rowsQuestion(plan, this.path, this.#wanted, this.rows, this.#isSorted);
    this.#chunks = chunksOf(this.#connection as DuckDBConnection, this.path, question);
  }

  /** The next chunk; null at the end, and where too little memory ended the stream. */
  async #next(): Promise<DuckDBDataChunk | null> {
    try {
      const next = await (this.#chunks as AsyncGenerator<DuckDBDataChunk>).next();
      return next.done ? null : next.value;
    } catch (cause) {
      if (isOutOfMemory(cause)) return null;
      throw cause;
    }
  }

  /** A stream that ends too early does not say why: a few rows asked for outright do. Only too little memory can be mended. */
  async #askAgain(plan: ColumnPlan): Promise<void> {
    const connection = this.#connection as DuckDBConnection;
    const question = rowsQuestion(plan, this.path, this.#wanted, this.rows, this.#isSorted);
    try {
      await ask(connection, this.path, `SELECT max(columns(*)) FROM (${question} LIMIT ${PROBED})`);
    } catch (cause) {
      if (!isOutOfMemory(cause)) throw cause;
    }
    if (!(await this.#engine.raiseMemory(connection)))
      throw refusal(
        { file: this.path },
        `${plan.rows} rows as the file says`,
        `${this.rows} that can be read`,
        'copy or export it again',
      );
    this.#ask(plan);
  }

  #take(plan: ColumnPlan, chunk: DuckDBDataChunk): void {
    const times = this.#timesOf(plan, chunk);
    if (plan.format === 'wide Parquet') this.#wide(plan, chunk, times);
    else this.#long(plan, chunk, times);
    this.rows += chunk.rowCount;
  }

  /** Times of a chunk as instants, ms; in a long file those of other signals are let be. */
  #timesOf(plan: ColumnPlan, chunk: DuckDBDataChunk): Float64Array {
    const texts = plan.time === 'text' ? chunk.getColumnValues(0) : null;
    const numbers = texts === null ? numbersOf(chunk, 0) : null;
    const { gathering } = this;
    return Float64Array.from({ length: chunk.rowCount }, (_, i) => {
      const raw = texts === null ? (numbers as Float64Array)[i] : texts[i];
      const timeMs = this.#timeOf(plan, raw as number | string | null);
      if (Number.isNaN(timeMs)) throw this.#noTime(plan, this.rows + i + 1, raw);
      gathering.previousRowMs = timeMs;
      return timeMs;
    });
  }

  #timeOf(plan: ColumnPlan, raw: number | string | null): number {
    const previousMs = this.gathering.previousRowMs;
    if (typeof raw !== 'number') return this.#times.readText(raw ?? '', previousMs);
    if (plan.time === 'count') return this.#times.readNumber(raw);
    if (!(Math.abs(raw) <= LAST_MS)) return Number.NaN;
    return plan.time === 'local' ? this.#times.readLocal(raw, previousMs) : this.#times.readInstant(raw);
  }

  #noTime(plan: ColumnPlan, row: number, raw: unknown): Error {
    const isMissing = raw === null || Number.isNaN(raw);
    if (isMissing)
      return refusal(
        { file: this.path, line: row, field: plan.timeName },
        'a time in every row',
        'none',
        'mend or drop this row',
      );
    return timeRefusal(this.path, row, plan.timeName, this.#times, `"${String(raw)}"`);
  }

  #wide(plan: ColumnPlan, chunk: DuckDBDataChunk, times: Float64Array): void {
    const block = this.#block as Block;
    const { fromMs, untilMs } = this.gathering.span;
    const isIn = (time: number): boolean => time >= fromMs && time < untilMs;
    const kept = times.every(isIn) ? null : times.map((time) => (isIn(time) ? 1 : 0));
    const pick = (all: Float64Array): Float64Array => (kept === null ? all : all.filter((_, i) => kept[i] === 1));
    plan.channels.forEach((channel, k) => {
      const values = numbersOf(chunk, k + 1);
      this.#check(plan.valueNames[k] as string, values, kept);
      (block.values[channel] as GrowingList).append(pick(values));
    });
    block.times.append(pick(times));
    if (block.lines !== null) block.lines.append(pick(times.map((_, i) => this.rows + i + 1)));
  }

  /** Counts missing values, refuses infinite ones; only rows that are kept count. */
  #check(name: string, values: Float64Array, kept: Float64Array | null): void {
    let missing = 0;
    for (let i = 0; i < values.length; i++) {
      const value = values[i] as number;
      if (value - value === 0 || kept?.[i] === 0) continue;
      if (!Number.isNaN(value)) throw this.#noNumber(name, this.rows + i + 1, value);
      missing++;
    }
    if (missing > 0) this.#missing[''] = (this.#missing[''] ?? 0) + missing;
  }

  #noNumber(name: string, row: number, value: number): Error {
    return refusal(
      { file: this.path, line: row, field: name },
      'a number, or nothing where there is no reading',
      String(value),
      'mend or drop this row',
    );
  }

  #long(plan: ColumnPlan, chunk: DuckDBDataChunk, times: Float64Array): void {
    const channels = numbersOf(chunk, 1);
    const values = numbersOf(chunk, 2);
    for (let i = 0; i < times.length; i++) {
      const channel = channels[i] as number;
      const value = values[i] as number;
      const row = this.rows + i + 1;
      if (channel === -2)
        throw refusal(
          { file: this.path, line: row, field: plan.signalName ?? 'signal' },
          'a name',
          'nothing',
          'mend or drop this row',
        );
      if (channel < 0) continue;
      if (Number.isNaN(value)) tally(this.#missing, '');
      else if (value - value !== 0) throw this.#noNumber(plan.valueNames[0] as string, row, value);
      this.gathering.add(channel, times[i] as number, value, row);
    }
  }

  async #end(plan: ColumnPlan): Promise<void> {
    this.#account = {
      file: this.path,
      bytes: this.#file.bytes,
      sha256: await digestOfFile(this.path),
      ...{ format: plan.format, separator: null, rows: this.rows, timeKind: this.#times.kind },
      columnsIgnored: [...plan.columnsIgnored, ...(await this.#otherSignals(plan))],
      missingMarks: this.#missing,
      passedOver: {},
    };
    await this.close();
  }

  async #otherSignals({ signalName }: ColumnPlan): Promise<string[]> {
    if (signalName === null) return [];
    const name = `CAST(${named(signalName)} AS VARCHAR)`;
    const question = `SELECT DISTINCT ${name} AS name FROM read_parquet(${quotedPath(this.path)}, hive_partitioning = false) ORDER BY 1 LIMIT ${MOST_IGNORED}`;
    const found = await ask(this.#connection as DuckDBConnection, this.path, question);
    return found.map((row) => String(row.name)).filter((one) => !this.#wanted.includes(one));
  }
}

/** Furthest instant a date can hold, ECMA-262 section 21.4.1.1. */
const LAST_MS = 8.64e15;

/** A column of doubles where it lies; good until the next chunk. */
function numbersOf(chunk: DuckDBDataChunk, column: number): Float64Array {
  return (chunk.getColumnVector(column) as unknown as { readonly items: Float64Array }).items;
}
