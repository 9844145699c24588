/**
 * Wide CSV: one row a time, one column a signal. The reader of long histories, so the loop over fields makes no objects.
 */
import { readHeader, separatorName, timeColumn } from './csv-header.ts';
import {
  type FileAccount,
  type FileReader,
  numberRefusal,
  type ReaderState,
  tally,
  timeRefusal,
} from './file-reader.ts';
import type { Block, Gathering } from './gathering.ts';
import { numberOfBytes, numberOfText } from './numbers.ts';
import { RecordScanner, type RecordView } from './records.ts';
import { refusal } from './refusal.ts';
import { shownTime, type TimeReader } from './times.ts';

/** Reads one wide CSV file. */
export class WideCsvReader implements FileReader {
  readonly #path: string;
  readonly #separator: string;
  readonly #wanted: readonly string[];
  readonly #gathering: Gathering;
  readonly #times: TimeReader;
  readonly #scanner: RecordScanner;
  readonly #missingMarks: Record<string, number> = {};
  #names: readonly string[] | null = null;
  #time = 0;
  /** Column of each channel this file holds; other files may hold the others. */
  #columns = new Int32Array(0);
  #channels: readonly number[] = [];
  #block: Block | null = null;
  rows = 0;

  /** wanted  column of each channel, in channel order */
  constructor(path: string, separator: string, wanted: readonly string[], gathering: Gathering, times: TimeReader) {
    this.#path = path;
    this.#separator = separator;
    this.#wanted = wanted;
    this.#gathering = gathering;
    this.#times = times;
    this.#scanner = new RecordScanner(path, separator, 1, (record) => this.#take(record));
  }

  push(block: Buffer): void {
    this.#scanner.push(block);
  }

  end(): FileAccount {
    this.#scanner.end();
    if (this.rows === 0)
      throw refusal({ file: this.#path }, 'readings below the header', 'the header alone', 'export the file again');
    const names = this.#names ?? [];
    return {
      format: 'wide CSV',
      separator: separatorName(this.#separator),
      rows: this.rows,
      columnsIgnored: names.filter((name, index) => index !== this.#time && !this.#wanted.includes(name)),
      missingMarks: this.#missingMarks,
      passedOver: {},
    };
  }

  #take(record: RecordView): void {
    if (this.#names === null) this.#begin(readHeader(this.#path, record));
    else this.#row(record, this.#names);
  }

  state(): ReaderState {
    const { rest, line } = this.#scanner;
    return { rest, line, rows: this.rows, names: this.#names ?? [], missingMarks: this.#missingMarks };
  }

  restore(state: ReaderState): void {
    this.#scanner.restore(state.line);
    this.rows = state.rows;
    Object.assign(this.#missingMarks, state.missingMarks);
    if (state.names.length > 0) this.#begin(state.names);
  }

  #begin(names: readonly string[]): void {
    this.#time = timeColumn(names);
    this.#names = names;
    this.#channels = this.#wanted.flatMap((column, channel) => (names.includes(column) ? [channel] : []));
    this.#columns = Int32Array.from(this.#channels, (channel) => names.indexOf(this.#wanted[channel] as string));
    this.#block = this.#gathering.wideBlock(this.#channels);
  }

  #row(record: RecordView, names: readonly string[]): void {
    const isEndedBySeparator =
      record.count === names.length + 1 && record.starts[names.length] === record.ends[names.length];
    if (record.count !== names.length && !isEndedBySeparator) throw this.#ragged(record, names.length);
    const time = this.#time;
    const start = record.starts[time] as number;
    const end = record.ends[time] as number;
    const timeMs = this.#times.read(record.bytes, start, end, this.#gathering.previousRowMs);
    if (Number.isNaN(timeMs))
      throw timeRefusal(
        this.#path,
        record.line,
        names[time] as string,
        this.#times,
        shownTime(record.bytes, start, end),
      );
    this.#gathering.previousRowMs = timeMs;
    this.rows++;
    const { fromMs, untilMs } = this.#gathering.span;
    if (timeMs < fromMs || timeMs >= untilMs) return;
    const block = this.#block as Block;
    block.times.push(timeMs);
    block.lines?.push(record.line);
    const columns = this.#columns;
    const channels = this.#channels;
    for (let c = 0; c < columns.length; c++) {
      const column = columns[c] as number;
      const from = record.starts[column] as number;
      const to = record.ends[column] as number;
      const value =
        record.quoted[column] === 2 ? numberOfText(record.text(column)) : numberOfBytes(record.bytes, from, to);
      if (value === Number.POSITIVE_INFINITY || value === Number.NEGATIVE_INFINITY)
        throw numberRefusal(this.#path, record.line, names[column] as string, record.text(column));
      if (Number.isNaN(value)) tally(this.#missingMarks, to > from ? record.text(column) : '');
      (block.values[channels[c] as number] as { push(v: number): void }).push(value);
    }
  }

  #ragged(record: RecordView, expected: number): Error {
    const comma =
      this.#separator === ',' && record.count > expected
        ? ' (numbers with a decimal comma must be quoted or, better, written with a point)'
        : '';
    return refusal(
      { file: this.#path, line: record.line },
      `${expected} fields as in the header`,
      `${record.count}${comma}`,
      'mend or drop this line',
    );
  }
}
