/**
 * Promise against outcome: what a story must reach, what it reached, and whether that will do.
 */
import { formatColumns } from './progress.ts';

/** One promise and what came of it. */
export interface Verdict {
  readonly subject: string;
  readonly promise: string;
  readonly outcome: string;
  readonly isKept: boolean;
}

/** A number that must lie in [low, high]; NaN keeps no promise. */
export function expectBetween(
  subject: string,
  promise: string,
  value: number,
  [low, high]: readonly [number, number],
  show: (value: number) => string = (x) => String(x),
): Verdict {
  return {
    subject,
    promise,
    outcome: Number.isNaN(value) ? 'none' : show(value),
    isKept: value >= low && value <= high,
  };
}

/** A count that must be exactly so. */
export function expectExactly(subject: string, promise: string, value: number, expected: number): Verdict {
  return {
    subject,
    promise,
    outcome: value === expected ? String(value) : `${value}, expected ${expected}`,
    isKept: value === expected,
  };
}

/** All verdicts as a table, broken ones marked, with one closing sentence. */
export function verdictTable(verdicts: readonly Verdict[]): string {
  const broken = verdicts.filter((verdict) => !verdict.isKept).length;
  const table = formatColumns(
    ['subject', 'promise', 'outcome', ''],
    verdicts.map((verdict) => [verdict.subject, verdict.promise, verdict.outcome, verdict.isKept ? 'kept' : 'BROKEN']),
  );
  const close =
    broken === 0 ? `All ${verdicts.length} promises kept.` : `${broken} of ${verdicts.length} promises broken.`;
  return `${table}\n\n${close}`;
}

/** Exit code of a run: 0 when every promise was kept and there was one at all. */
export function exitCodeOf(verdicts: readonly Verdict[]): 0 | 1 {
  return verdicts.length > 0 && verdicts.every((verdict) => verdict.isKept) ? 0 : 1;
}
