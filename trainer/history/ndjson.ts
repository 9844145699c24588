/**
 * Lines of JSON, one object a line: the part that long readings and captured messages have in common.
 */
import { refusal, shown } from './refusal.ts';

const NEWLINE = 10;

/** Calls `onLine` with the object of every line that is not blank; line numbers run on over blocks. */
export class LineObjects {
  readonly #path: string;
  readonly #onLine: (line: Readonly<Record<string, unknown>>, number: number) => void;
  /** Lines so far. */
  number = 0;

  constructor(path: string, onLine: (line: Readonly<Record<string, unknown>>, number: number) => void) {
    this.#path = path;
    this.#onLine = onLine;
  }

  /** throws  TrainError 'history' where a line is no JSON object */
  push(block: Buffer): void {
    for (let from = 0; from < block.length; ) {
      const newline = block.indexOf(NEWLINE, from);
      const end = newline < 0 ? block.length : newline;
      this.number++;
      const text = block.toString('utf8', from, end).trim();
      from = end + 1;
      if (text !== '') this.#onLine(this.#parse(text), this.number);
    }
  }

  #parse(text: string): Readonly<Record<string, unknown>> {
    let value: unknown;
    try {
      value = JSON.parse(text);
    } catch (cause) {
      throw refusal(
        { file: this.#path, line: this.number },
        'one JSON object a line',
        shown(text),
        'mend or drop this line',
        { cause },
      );
    }
    if (typeof value === 'object' && value !== null && !Array.isArray(value)) return value as Record<string, unknown>;
    throw refusal({ file: this.#path, line: this.number }, 'a JSON object', shown(text), 'mend or drop this line');
  }
}

/** A member's value, as a refusal shows it. */
export function shownMember(value: unknown): string {
  return value === undefined ? 'nothing' : shown(typeof value === 'string' ? value : JSON.stringify(value));
}
