/**
 * Long NDJSON: {"time", "signal", "value"} a line. Signals the site does not name are passed over.
 */
import {
  type FileAccount,
  type FileReader,
  numberRefusal,
  type ReaderState,
  tally,
  timeRefusal,
} from './file-reader.ts';
import type { Gathering } from './gathering.ts';
import { LineObjects, shownMember } from './ndjson.ts';
import { numberOfText } from './numbers.ts';
import { refusal } from './refusal.ts';
import type { TimeReader } from './times.ts';

/** Reads one file of long JSON lines. */
export class LongNdjsonReader implements FileReader {
  readonly #path: string;
  readonly #channelOf: ReadonlyMap<string, number>;
  readonly #gathering: Gathering;
  readonly #times: TimeReader;
  readonly #lines: LineObjects;
  readonly #missingMarks: Record<string, number> = {};
  readonly #ignored = new Set<string>();
  rows = 0;

  /** channelOf  channel by the text of "signal" */
  constructor(path: string, channelOf: ReadonlyMap<string, number>, gathering: Gathering, times: TimeReader) {
    this.#path = path;
    this.#channelOf = channelOf;
    this.#gathering = gathering;
    this.#times = times;
    this.#lines = new LineObjects(path, (line, number) => this.#row(line, number));
  }

  push(block: Buffer): void {
    this.#lines.push(block);
  }

  end(): FileAccount {
    return {
      format: 'long NDJSON',
      separator: null,
      rows: this.rows,
      columnsIgnored: [...this.#ignored].sort(),
      missingMarks: this.#missingMarks,
      passedOver: {},
    };
  }

  state(): ReaderState {
    const { rows } = this;
    return {
      ...{ rest: 0, line: this.#lines.number, rows, names: [] },
      ...{ missingMarks: this.#missingMarks, ignored: [...this.#ignored] },
    };
  }

  restore(state: ReaderState): void {
    this.#lines.number = state.line;
    this.rows = state.rows;
    Object.assign(this.#missingMarks, state.missingMarks);
    for (const name of state.ignored ?? []) this.#ignored.add(name);
  }

  #row(line: Readonly<Record<string, unknown>>, number: number): void {
    const { signal } = line;
    if (typeof signal !== 'string' || signal === '')
      throw refusal(
        { file: this.#path, line: number, field: 'signal' },
        'the name of a signal',
        shownMember(signal),
        'write each line as {"time": …, "signal": …, "value": …}, or captured messages as {"time": …, "topic": …, "payload": …}',
      );
    this.rows++;
    const channel = this.#channelOf.get(signal);
    if (channel === undefined) {
      this.#ignored.add(signal);
      return;
    }
    const timeMs = readMemberTime(
      this.#path,
      number,
      line.time,
      this.#times,
      this.#gathering.previousMs[channel] as number,
    );
    this.#gathering.previousMs[channel] = timeMs;
    this.#gathering.add(channel, timeMs, this.#value(line.value, number), number);
  }

  #value(member: unknown, number: number): number {
    if (typeof member === 'number') return member;
    const text = member === null ? 'null' : typeof member === 'string' ? member : null;
    const value = text === null ? Number.POSITIVE_INFINITY : numberOfText(text);
    if (Number.isNaN(value)) tally(this.#missingMarks, text ?? '');
    else if (!Number.isFinite(value))
      throw numberRefusal(this.#path, number, 'value', text ?? String(JSON.stringify(member)));
    return value;
  }
}

/**
 * Time member of a line: ISO text or a count since 1970.
 *
 * throws  TrainError 'history' where it is none
 */
export function readMemberTime(
  path: string,
  line: number,
  member: unknown,
  times: TimeReader,
  previousMs: number,
): number {
  const timeMs =
    typeof member === 'number'
      ? times.readNumber(member)
      : times.readText(typeof member === 'string' ? member : '', previousMs);
  if (Number.isNaN(timeMs)) throw timeRefusal(path, line, 'time', times, shownMember(member));
  return timeMs;
}
