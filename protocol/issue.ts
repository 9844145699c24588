/**
 * Turns what a schema found wrong into one sentence: where, expected, got. The schema library's own wording is not used
 * because it names types of the host language and seldom what was got.
 */
import type { z } from 'zod';
import { nearestName } from './nearest.ts';
import { formatPath } from './path.ts';

type Issue = z.core.$ZodIssue;

/** One thing wrong with a document. */
export interface Fault {
  /** Path of the value; for a key that should not be there, the path of that key. */
  readonly path: readonly PropertyKey[];
  /** Whether `path` ends in a key that is not known. */
  readonly isUnknownKey: boolean;
  /** Sentence without the path: "expected …, got …". */
  readonly text: string;
}

/** Writes a value for a message: short, on one line. */
export const showValue = (value: unknown): string => {
  if (value === undefined) return 'nothing';
  if (value instanceof Uint8Array) return `${value.length} bytes`;
  if (Array.isArray(value))
    return value.length > 3 ? `a list of ${value.length}` : `[${value.map(showValue).join(', ')}]`;
  if (typeof value === 'object' && value !== null) return 'a map';
  if (typeof value === 'string') return JSON.stringify(value.length > 60 ? `${value.slice(0, 57)}…` : value);
  return String(value);
};

const TYPE_NAMES: Readonly<Record<string, string>> = {
  object: 'a map',
  record: 'a map',
  array: 'a list',
  tuple: 'a list',
  string: 'text',
  number: 'a number',
  int: 'a whole number',
  boolean: 'true or false',
  Uint8Array: 'bytes',
  null: 'null',
};

const size = (
  issue: { origin: string; inclusive?: boolean | undefined },
  bound: unknown,
  word: 'least' | 'most',
): string => {
  const strict = word === 'least' ? `more than ${bound}` : `less than ${bound}`;
  if (issue.origin === 'array') return `at ${word} ${bound} entries`;
  if (issue.origin === 'string') return `at ${word} ${bound} characters`;
  return issue.inclusive === false ? strict : `at ${word} ${bound}`;
};

const expectation = (issue: Issue): string => {
  switch (issue.code) {
    case 'invalid_type':
      return TYPE_NAMES[issue.expected] ?? issue.expected;
    case 'too_small':
      return size(issue, issue.minimum, 'least');
    case 'too_big':
      return size(issue, issue.maximum, 'most');
    case 'invalid_value':
      return issue.values.map((value) => JSON.stringify(value)).join(' or ');
    case 'invalid_union': {
      const each = issue.errors.map((errors) => errors[0]).filter((one) => one !== undefined);
      return [...new Set(each.map(expectation))].join(' or ');
    }
    default:
      return issue.message;
  }
};

const valueAt = (root: unknown, path: readonly PropertyKey[]): unknown =>
  path.reduce<unknown>(
    (value, step) =>
      typeof value === 'object' && value !== null ? (value as Record<PropertyKey, unknown>)[step] : undefined,
    root,
  );

/**
 * Lists what a schema refused, unknown keys first (a mistyped key also shows up as a missing one).
 *
 * units   `known` gives the keys a map at a path may have, for suggestions
 */
export const listFaults = (
  error: z.ZodError,
  root: unknown,
  known: (path: readonly PropertyKey[]) => readonly string[],
): readonly Fault[] => {
  const faults = error.issues.flatMap((issue): Fault[] => {
    if (issue.code === 'unrecognized_keys') {
      return issue.keys.map((key) => ({
        path: [...issue.path, key],
        isUnknownKey: true,
        text: unknownKeyText(key, known(issue.path), valueAt(root, issue.path)),
      }));
    }
    const got = valueAt(root, issue.path);
    const isWhole =
      issue.code === 'custom' && (!issue.message.startsWith('expected ') || issue.message.includes(', got '));
    const wanted = issue.code === 'custom' ? issue.message : `expected ${expectation(issue)}`;
    const text = isWhole ? wanted : `${wanted}, got ${showValue(got)}`;
    return [{ path: issue.path, isUnknownKey: false, text }];
  });
  return faults.sort((a, b) => Number(b.isUnknownKey) - Number(a.isUnknownKey));
};

const unknownKeyText = (key: string, known: readonly string[], map: unknown): string => {
  const taken = typeof map === 'object' && map !== null ? Object.keys(map) : [];
  const near = nearestName(
    key,
    known.filter((name) => !taken.includes(name)),
  );
  if (near !== null) return `is not a known key; did you mean "${near}"?`;
  return `is not a known key; expected one of ${known.join(', ')}`;
};

/** "signals[0].unit: expected text, got 5", or "signals[0].unt is not a known key; …". */
export const formatFault = (fault: Fault): string => {
  const path = formatPath(fault.path);
  if (fault.isUnknownKey) return `${path} ${fault.text}`;
  return path === '' ? fault.text : `${path}: ${fault.text}`;
};
