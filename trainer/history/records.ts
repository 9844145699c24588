/**
 * Separated text by RFC 4180: fields as byte ranges, quoted fields with doubled quotes and line breaks inside, CRLF or LF.
 * Kinder than the standard where loggers are sloppy: blank lines are passed over, blanks around a plain field are cut.
 * Line numbers count real lines, so that an editor finds the place.
 */
import { textOfBytes } from './numbers.ts';
import { refusal } from './refusal.ts';

const QUOTE = 34;
const NEWLINE = 10;
const RETURN = 13;
const BLANK = 32;

/** One record; valid until the next one is read. */
export class RecordView {
  bytes: Uint8Array = new Uint8Array(0);
  starts = new Int32Array(64);
  ends = new Int32Array(64);
  /** 1 where the field was quoted, 2 where quotes inside must be undoubled. */
  quoted = new Uint8Array(64);
  count = 0;
  line = 0;

  /** Text of a field, quotes undone. */
  text(index: number): string {
    const text = textOfBytes(this.bytes, this.starts[index] as number, this.ends[index] as number);
    return this.quoted[index] === 2 ? text.replaceAll('""', '"') : text;
  }

  /** Notes a field; grows as needed. */
  add(start: number, end: number, quoted: number): void {
    if (this.count === this.starts.length) this.#widen();
    this.starts[this.count] = start;
    this.ends[this.count] = end;
    this.quoted[this.count] = quoted;
    this.count++;
  }

  #widen(): void {
    const size = this.starts.length * 2;
    const wider = { starts: new Int32Array(size), ends: new Int32Array(size), quoted: new Uint8Array(size) };
    wider.starts.set(this.starts);
    wider.ends.set(this.ends);
    wider.quoted.set(this.quoted);
    Object.assign(this, wider);
  }
}

/** Cuts blocks into records and hands each to `onRecord`. */
export class RecordScanner {
  readonly #separator: number;
  readonly #path: string;
  readonly #onRecord: (record: RecordView) => void;
  readonly #record = new RecordView();
  #rest: Uint8Array = new Uint8Array(0);
  #line: number;

  constructor(path: string, separator: string, firstLine: number, onRecord: (record: RecordView) => void) {
    this.#path = path;
    this.#separator = separator.charCodeAt(0);
    this.#line = firstLine;
    this.#onRecord = onRecord;
  }

  /** Bytes taken but not yet cut: a record whose quotes are still open. */
  get rest(): number {
    return this.#rest.length;
  }

  /** Line of the next record. */
  get line(): number {
    return this.#line;
  }

  /** Goes on at a line, before any block is taken. */
  restore(line: number): void {
    this.#line = line;
  }

  /** Takes a block that ends with a line break, or the last one. */
  push(block: Uint8Array): void {
    const bytes = this.#rest.length > 0 ? Buffer.concat([this.#rest, block]) : block;
    this.#rest = new Uint8Array(0);
    let at = 0;
    while (at < bytes.length) {
      const next = this.#scan(bytes, at, false);
      if (next < 0) {
        this.#rest = bytes.subarray(at);
        return;
      }
      at = next;
    }
  }

  /** Takes what is left after the last block. */
  end(): void {
    const rest = this.#rest;
    this.#rest = new Uint8Array(0);
    if (rest.length > 0) this.#scan(rest, 0, true);
  }

  /** Scans one record from `from`; its end, or -1 where a quoted field runs past the block. */
  #scan(bytes: Uint8Array, from: number, isLast: boolean): number {
    const record = this.#record;
    record.bytes = bytes;
    record.count = 0;
    record.line = this.#line;
    let at = from;
    let lines = 1;
    for (;;) {
      let start = at;
      let end: number;
      let quoted = 0;
      while (bytes[start] === BLANK) start++;
      if (bytes[start] === QUOTE) {
        start++;
        quoted = 1;
        end = start;
        for (; end < bytes.length; end++) {
          if (bytes[end] === NEWLINE) lines++;
          if (bytes[end] !== QUOTE) continue;
          if (bytes[end + 1] !== QUOTE) break;
          quoted = 2;
          end++;
        }
        if (end >= bytes.length) {
          if (!isLast) return -1;
          throw refusal(
            { file: this.#path, line: record.line },
            'a closing quote',
            'the end of the file',
            'mend or drop this line',
          );
        }
        at = end + 1;
        while (at < bytes.length && (bytes[at] === BLANK || bytes[at] === RETURN)) at++;
        if (at < bytes.length && bytes[at] !== this.#separator && bytes[at] !== NEWLINE)
          throw refusal(
            { file: this.#path, line: record.line },
            'a separator after the closing quote',
            `"${String.fromCharCode(bytes[at] as number)}"`,
            'double the quotes inside a quoted field',
          );
      } else {
        const separator = this.#separator;
        while (at < bytes.length) {
          const byte = bytes[at];
          if (byte === separator || byte === NEWLINE) break;
          at++;
        }
        end = at;
        while (end > start && (bytes[end - 1] === BLANK || bytes[end - 1] === RETURN)) end--;
      }
      record.add(start, end, quoted);
      if (at >= bytes.length || bytes[at] === NEWLINE) break;
      at++;
    }
    this.#line += lines;
    const isBlank = record.count === 1 && record.starts[0] === record.ends[0] && record.quoted[0] === 0;
    if (!isBlank) this.#onRecord(record);
    return at + 1;
  }
}
