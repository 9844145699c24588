/**
 * Long CSV: one row a reading, with columns for time, signal and value. Signals the site does not name are passed over.
 */
import { longColumns, readHeader, separatorName } from './csv-header.ts';
import {
  type FileAccount,
  type FileReader,
  numberRefusal,
  type ReaderState,
  tally,
  timeRefusal,
} from './file-reader.ts';
import type { Gathering } from './gathering.ts';
import { numberOfText } from './numbers.ts';
import { RecordScanner, type RecordView } from './records.ts';
import { refusal, shown } from './refusal.ts';
import type { TimeReader } from './times.ts';

/** Reads one long CSV file. */
export class LongCsvReader implements FileReader {
  readonly #path: string;
  readonly #separator: string;
  readonly #channelOf: ReadonlyMap<string, number>;
  readonly #gathering: Gathering;
  readonly #times: TimeReader;
  readonly #scanner: RecordScanner;
  readonly #missingMarks: Record<string, number> = {};
  readonly #ignored = new Set<string>();
  #names: readonly string[] = [];
  #columns: { time: number; signal: number; value: number } | null = null;
  rows = 0;

  /** channelOf  channel by the text of the signal column */
  constructor(
    path: string,
    separator: string,
    channelOf: ReadonlyMap<string, number>,
    gathering: Gathering,
    times: TimeReader,
  ) {
    this.#path = path;
    this.#separator = separator;
    this.#channelOf = channelOf;
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
    return {
      format: 'long CSV',
      separator: separatorName(this.#separator),
      rows: this.rows,
      columnsIgnored: [...this.#ignored].sort(),
      missingMarks: this.#missingMarks,
      passedOver: {},
    };
  }

  state(): ReaderState {
    const { rest, line } = this.#scanner;
    const { rows } = this;
    return { rest, line, rows, names: this.#names, missingMarks: this.#missingMarks, ignored: [...this.#ignored] };
  }

  restore(state: ReaderState): void {
    this.#scanner.restore(state.line);
    this.rows = state.rows;
    Object.assign(this.#missingMarks, state.missingMarks);
    for (const name of state.ignored ?? []) this.#ignored.add(name);
    this.#names = state.names;
    if (state.names.length > 0) this.#columns = longColumns(state.names);
  }

  #take(record: RecordView): void {
    if (this.#columns === null) {
      this.#names = readHeader(this.#path, record);
      this.#columns = longColumns(this.#names);
      return;
    }
    this.#row(record, this.#columns);
  }

  #row(record: RecordView, columns: { time: number; signal: number; value: number }): void {
    const place = { file: this.#path, line: record.line };
    if (record.count !== this.#names.length)
      throw refusal(
        place,
        `${this.#names.length} fields as in the header`,
        `${record.count}`,
        'mend or drop this line',
      );
    this.rows++;
    const signal = record.text(columns.signal);
    if (signal === '')
      throw refusal(
        { ...place, field: this.#names[columns.signal] as string },
        'a name',
        'an empty field',
        'mend or drop this line',
      );
    const channel = this.#channelOf.get(signal);
    if (channel === undefined) {
      this.#ignored.add(signal);
      return;
    }
    const previousMs = this.#gathering.previousMs[channel] as number;
    const from = record.starts[columns.time] as number;
    const timeMs = this.#times.read(record.bytes, from, record.ends[columns.time] as number, previousMs);
    if (Number.isNaN(timeMs))
      throw timeRefusal(
        this.#path,
        record.line,
        this.#names[columns.time] as string,
        this.#times,
        shown(record.text(columns.time)),
      );
    this.#gathering.previousMs[channel] = timeMs;
    const text = record.text(columns.value);
    const value = numberOfText(text);
    if (!Number.isFinite(value)) {
      if (!Number.isNaN(value))
        throw numberRefusal(this.#path, record.line, this.#names[columns.value] as string, text);
      tally(this.#missingMarks, text);
    }
    this.#gathering.add(channel, timeMs, value, record.line);
  }
}
