/** The plans of a question as people give them on a command line or in a file, put as a question has them. */
import { readFileSync } from 'node:fs';
import { formatInstant, MAX_PAYLOAD_BYTES, parseDuration, parseInstant } from '@stillwell/protocol';
import { TrainError } from '../errors.ts';
import { printable } from '../text-table.ts';

/** What may stand behind `INPUT=`, for help and refusals. */
export const PLAN_RULE =
  'INPUT=VALUE to be held, INPUT=V,V,… a tick each, INPUT=V,V,…/30min, INPUT=none, or INPUT=@FILE (.json, or .csv of time and value)';

const WORDS: Readonly<Record<string, number>> = { true: 1, on: 1, false: 0, off: 0 };

/**
 * Reads the plans given, by input.
 *
 * throws  TrainError 'options' or 'file' with expected and got
 */
export function readPlans(given: readonly string[]): Readonly<Record<string, unknown>> {
  const plans = new Map<string, unknown>();
  for (const text of given) {
    const at = text.indexOf('=');
    if (at <= 0 || at === text.length - 1) refuse(text, PLAN_RULE);
    const [input, what] = [text.slice(0, at).trim(), text.slice(at + 1).trim()];
    if (plans.has(input)) refuse(text, `one plan for each input, got a second one for "${input}"`);
    plans.set(input, what.startsWith('@') ? fromFile(what.slice(1)) : fromText(text, what));
  }
  return Object.fromEntries(plans);
}

function refuse(given: string, expected: string): never {
  throw new TrainError('options', `--plan "${printable(given)}": expected ${expected}`);
}

function fromText(given: string, what: string): unknown {
  if (what === 'none') return null;
  const [list, step, ...more] = what.split('/');
  const values = list!.split(',').map(numberOf);
  const isStep = step === undefined || (parseDuration(step) ?? 0) > 0;
  if (values.some(Number.isNaN) || !isStep || more.length > 0) refuse(given, PLAN_RULE);
  if (step === undefined && values.length === 1) return values[0];
  return step === undefined ? { values } : { values, step };
}

function numberOf(text: string): number {
  const word = text.trim();
  return word === '' ? Number.NaN : (WORDS[word.toLowerCase()] ?? Number(word));
}

function fromFile(path: string): unknown {
  const text = readText(path);
  const isJson = /^\s*[[{]/.test(text);
  if (!isJson) return fromCsv(path, text);
  try {
    return JSON.parse(text);
  } catch (cause) {
    throw new TrainError('file', `plan ${path}: expected JSON, got what is none (${(cause as Error).message})`, {
      cause,
    });
  }
}

function readText(path: string): string {
  try {
    const bytes = readFileSync(path);
    if (bytes.length > MAX_PAYLOAD_BYTES)
      throw new TrainError('file', `plan ${path}: expected at most ${MAX_PAYLOAD_BYTES} bytes, got ${bytes.length}`);
    return bytes.toString('utf8');
  } catch (cause) {
    if (cause instanceof TrainError) throw cause;
    const code = (cause as { code?: string }).code ?? 'unreadable';
    throw new TrainError('file', `plan ${path}: cannot be read (${code})`, { cause });
  }
}

/** Time and value by commas or semicolons, or values alone, a tick each; a first line of words is a heading. */
function fromCsv(path: string, text: string): unknown {
  const lines = text
    .split(/\r?\n/)
    .flatMap((line, i) => (line.trim() === '' ? [] : [{ cells: line.split(/[,;\t]/), at: i + 1 }]));
  const isHeading = lines.length > 0 && Number.isNaN(numberOf(lines[0]!.cells.at(-1)!));
  const rows = isHeading ? lines.slice(1) : lines;
  if (rows.length === 0) throw new TrainError('file', `plan ${path}: expected lines of time and value, got none`);
  const columns = rows[0]!.cells.length;
  const read = rows.map(({ cells, at }) => {
    const value = numberOf(cells.at(-1)!);
    const ms = columns === 1 ? 0 : parseInstant(cells[0]!.trim());
    if (cells.length !== columns || columns > 2 || Number.isNaN(value) || ms === null) {
      const expected = 'a time such as 2026-03-01T12:00:00Z and a value, or a value alone';
      throw new TrainError('file', `plan ${path}:${at}: expected ${expected}, got "${printable(cells.join(','))}"`);
    }
    return { ms, value };
  });
  if (columns === 1) return { values: read.map(({ value }) => value) };
  return { points: read.map(({ ms, value }) => ({ time: formatInstant(ms), value })) };
}
