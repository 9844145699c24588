/**
 * The one wording of refusals about files that are read: where, expected, got, what to do.
 */
import { TrainError } from '../errors.ts';

/** Where a refusal points: line counts from 1, as editors do; `field` is a column's or member's name. */
export interface Place {
  readonly file: string;
  readonly line?: number;
  readonly field?: string;
}

const SHOWN = 60;

/** Text from outside, made fit for one line of a message. */
export function shown(text: string): string {
  // biome-ignore lint/suspicious/noControlCharactersInRegex: control characters are what is taken out
  const plain = text.replace(/[\u0000-\u001f\u007f-\u009f]/g, '?');
  return `"${plain.length > SHOWN ? `${plain.slice(0, SHOWN)}…` : plain}"`;
}

/** Builds the refusal; the caller throws it. */
export function refusal(
  place: Place,
  expected: string,
  got: string,
  remedy: string,
  options: { cause?: unknown } = {},
): TrainError {
  const line = place.line === undefined ? '' : `:${place.line}`;
  const field = place.field === undefined ? '' : `, column ${shown(place.field)}`;
  return new TrainError('history', `${place.file}${line}${field}: expected ${expected}, got ${got}; ${remedy}`, {
    details: { ...place, expected, got },
    ...options,
  });
}

/** The refusal of a file that the system does not give, `what` it was to be; from the system's error. */
export function unreadable(path: string, what: string, cause: unknown): TrainError {
  const code = (cause as NodeJS.ErrnoException).code;
  const refuse = (words: string): TrainError => new TrainError('file', `${path}: ${words}`, { cause });
  if (code === 'ENOENT') return refuse(`expected ${what}, got nothing: there is no such file; check the path`);
  if (code === 'EISDIR') return refuse(`expected ${what}, got a folder; name the files in it`);
  if (code === 'EACCES' || code === 'EPERM') return refuse("may not be read; check the file's permissions");
  return refuse(`cannot be read (${code ?? String(cause)}); check the path and the disk`);
}
