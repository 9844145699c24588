/**
 * The one wording of refusals about history files: where, expected, got, what to do.
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
