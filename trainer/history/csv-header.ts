/**
 * The first line of a CSV file: which separator, which column holds the time, and whether it is a header at all.
 */
import { isMissingMark, numberOfText } from './numbers.ts';
import type { RecordView } from './records.ts';
import { refusal, shown } from './refusal.ts';

const SEPARATORS = [',', ';', '\t', '|'];
const SAMPLE_LINES = 20;
/** Column names that mean the time, compared without case; else the first column is taken. */
const TIME_NAMES = ['time', 'timestamp', 'datetime', 'date', 'date_time', 'ts', 'time_ms', 'time_s', 'epoch'];

/** Words for messages. */
export function separatorName(separator: string): string {
  return { ',': 'comma', ';': 'semicolon', '\t': 'tab', '|': 'bar' }[separator] ?? separator;
}

function countOutsideQuotes(line: string, separator: string): number {
  let count = 0;
  let isQuoted = false;
  for (const letter of line) {
    if (letter === '"') isQuoted = !isQuoted;
    else if (letter === separator && !isQuoted) count++;
  }
  return count;
}

/**
 * Separator of a file: the one that cuts its first lines into equally many fields.
 *
 * throws  TrainError 'history' where the header has one column only, whichever way it is cut
 */
export function findSeparator(path: string, head: string): string {
  const lines = head
    .split(/\r?\n/)
    .filter((line) => line.trim() !== '')
    .slice(0, SAMPLE_LINES);
  const header = lines[0] ?? '';
  const found = SEPARATORS.map((separator) => {
    const counts = lines.map((line) => countOutsideQuotes(line, separator));
    return { separator, count: counts[0] ?? 0, isEven: counts.every((count) => count === counts[0]) };
  }).filter(({ count }) => count > 0);
  if (found.length === 0)
    throw refusal(
      { file: path, line: 1 },
      'a header with a time column and at least one more, separated by comma, semicolon, tab or |',
      shown(header),
      'check the separator, and that this is the right file',
    );
  found.sort((a, b) => Number(b.isEven) - Number(a.isEven) || b.count - a.count);
  return (found[0] as { separator: string }).separator;
}

/** Names of the columns; a last empty one, from a separator at the line's end, is dropped. */
export function readHeader(path: string, record: RecordView): string[] {
  const names = Array.from({ length: record.count }, (_, index) => record.text(index));
  if (names.length > 1 && names.at(-1) === '') names.pop();
  const place = { file: path, line: record.line };
  if (names.slice(1).every((name) => isMissingMark(name) || Number.isFinite(numberOfText(name))))
    throw refusal(
      place,
      'a header line with the names of the columns',
      shown(names.join(',')),
      'write the names above the first reading',
    );
  const seen = new Map<string, number>();
  names.forEach((name, index) => {
    if (name === '')
      throw refusal(place, 'a name for every column', `none for column ${index + 1}`, 'name the column or take it out');
    const first = seen.get(name);
    if (first !== undefined)
      throw refusal(
        { ...place, field: name },
        'each column name once',
        `it in columns ${first + 1} and ${index + 1}`,
        'rename or take out one of them',
      );
    seen.set(name, index);
  });
  return names;
}

/** Index of the time column: one that is called so, else the first. */
export function timeColumn(names: readonly string[]): number {
  const lower = names.map((name) => name.toLowerCase());
  for (const word of TIME_NAMES) {
    const index = lower.indexOf(word);
    if (index >= 0) return index;
  }
  return 0;
}

/** Columns of a long file, where the header names all three; null for a wide one. */
export function longColumns(names: readonly string[]): { time: number; signal: number; value: number } | null {
  const lower = names.map((name) => name.toLowerCase());
  const signal = lower.indexOf('signal');
  const value = lower.indexOf('value');
  const time = timeColumn(names);
  return signal >= 0 && value >= 0 && time !== signal && time !== value ? { time, signal, value } : null;
}
