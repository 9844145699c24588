/**
 * What the readers passed over: columns, marks for missing readings, messages.
 */
import { counted, type Finding } from './finding.ts';
import type { FileRead } from './history.ts';
import { shown } from './refusal.ts';

const LISTED = 8;

function list(names: readonly string[]): string {
  const few = names.slice(0, LISTED).map(shown).join(', ');
  return names.length > LISTED ? `${few} and ${names.length - LISTED} more` : few;
}

/** Sum of counts by key over files, keys in order. */
function summed(
  files: readonly FileRead[],
  of: (file: FileRead) => Readonly<Record<string, number>>,
): [string, number][] {
  const sums = new Map<string, number>();
  for (const file of files)
    for (const [key, count] of Object.entries(of(file))) sums.set(key, (sums.get(key) ?? 0) + count);
  return [...sums].sort((a, b) => (a[0] < b[0] ? -1 : 1));
}

/** Findings about the files as a whole. */
export function fileFindings(files: readonly FileRead[]): Finding[] {
  const whole = { signal: null, from: null, to: null, weight: 'note' } as const;
  const found: Finding[] = [];
  const ignored = [...new Set(files.flatMap((file) => file.columnsIgnored))].sort();
  if (ignored.length > 0)
    found.push({
      ...whole,
      kind: 'columns',
      count: ignored.length,
      sentence: `The files also hold ${list(ignored)}, which the site file does not name; passed over.`,
      advice: 'Add them to the site file if they should be learned from.',
    });
  const marks = summed(files, (file) => file.missingMarks);
  const total = marks.reduce((sum, [, count]) => sum + count, 0);
  if (total > 0)
    found.push({
      ...whole,
      kind: 'missing-marks',
      count: total,
      sentence: `${counted(total, 'field')} said that there was no reading: ${marks.map(([mark, count]) => `${mark === '' ? 'empty' : shown(mark)} ${count} times`).join(', ')}.`,
      advice: 'Nothing to do.',
    });
  for (const [cause, count] of summed(files, (file) => file.passedOver))
    found.push({
      ...whole,
      weight: 'look',
      kind: 'passed-over',
      count,
      sentence: `${counted(count, 'captured message')} passed over: ${cause}.`,
      advice: 'Mend the payload mapping in the site file if these messages carry readings.',
    });
  return found;
}
