/**
 * Time that must not teach: maintenance and faults, left out of learning, calibrating and judging alike. An entry of the
 * site file's `exclude` says when, either by two times or by a signal that says so, and why. The gateway passes it over.
 */
import { z } from 'zod';
import { checked } from './checked-value.ts';
import { formatDuration, parseDuration } from './duration.ts';
import { formatInstant, parseInstant } from './instant.ts';
import type { Fault } from './issue.ts';
import { nearestName } from './nearest.ts';

/** What every entry says. */
interface Reasoned {
  readonly reason: string;
  /** Signals and inputs whose readings are not to be believed; null: the whole plant, whose readings are real but unusual. */
  readonly signals: readonly string[] | null;
}

/** A span of time, ms since 1970 UTC; `toMs` is no longer in it. */
export interface ExcludedSpan extends Reasoned {
  readonly fromMs: number;
  readonly toMs: number;
}

/** While a signal or input says so, and a margin before and after. A reading holds until the next. */
export interface ExcludedWhile extends Reasoned {
  readonly when: { readonly signal: string; readonly is: (typeof COMPARISONS)[number]; readonly level: number };
  readonly beforeMs: number;
  readonly afterMs: number;
}

/** One entry of `exclude`. */
export type Exclusion = ExcludedSpan | ExcludedWhile;

/** How a reading is held against a level. */
const COMPARISONS = ['above', 'below', 'equals'] as const;
/** Entries of one site file: one a week for twenty years. */
const MOST_ENTRIES = 1024;

const isText = (value: unknown): value is string => typeof value === 'string' && value !== '';
const text = checked('text', (value) => (isText(value) ? value : undefined));
const level = checked('a number', (value) => (typeof value === 'number' && Number.isFinite(value) ? value : undefined));
const instant = checked('a time with its zone, such as 2026-03-04T06:00:00Z or 2026-03-04T07:00:00+01:00', (value) =>
  isText(value) ? (parseInstant(value) ?? undefined) : undefined,
);
const margin = checked('a duration such as "10min" or "2h"', (value) =>
  isText(value) ? (parseDuration(value) ?? undefined) : undefined,
);
const channel = checked('the name of a signal or input', (value) => (isText(value) ? value : undefined));

/** The map under `when`. */
export const whenSchema = z.strictObject({
  signal: channel,
  above: level.nullish(),
  below: level.nullish(),
  equals: level.nullish(),
});

/** One entry of `exclude`, as it stands in YAML. */
export const excludeEntrySchema = z.strictObject({
  from: instant.nullish(),
  to: instant.nullish(),
  when: whenSchema.nullish(),
  before: margin.nullish(),
  after: margin.nullish(),
  signals: z.array(channel).min(1).nullish(),
  reason: text,
});

/** The list under `exclude`. */
export const excludeSchema = z.array(excludeEntrySchema).max(MOST_ENTRIES);

type Entry = z.output<typeof excludeEntrySchema>;

const fault = (path: readonly PropertyKey[], words: string): Fault => ({ path, isUnknownKey: false, text: words });
const isSet = <T>(value: T | null | undefined): value is T => value !== undefined && value !== null;

const nameFault = (name: string, names: readonly string[], path: readonly PropertyKey[]): Fault[] => {
  if (names.includes(name)) return [];
  const near = nearestName(name, names);
  const hint = near === null ? '' : ` (did you mean "${near}"?)`;
  return [fault(path, `expected the name of a signal or input of this site${hint}, got ${JSON.stringify(name)}`)];
};

const spanFaults = ({ from, to, when, before, after }: Entry, path: readonly PropertyKey[]): Fault[] => {
  if (isSet(when)) {
    const stray = isSet(from) ? 'from' : isSet(to) ? 'to' : null;
    return stray === null ? [] : [fault([...path, stray], 'expected either from and to, or when, got both')];
  }
  if (!isSet(from) && !isSet(to)) return [fault(path, 'expected from and to, or when, got neither')];
  if (!isSet(from) || !isSet(to)) {
    const [missing, there] = isSet(from) ? ['to', 'from'] : ['from', 'to'];
    return [fault(path, `expected ${missing} beside ${there}, got nothing`)];
  }
  if (to <= from) return [fault([...path, 'to'], `expected a time after from, got ${formatInstant(to)}`)];
  const stray = isSet(before) ? 'before' : isSet(after) ? 'after' : null;
  if (stray === null) return [];
  return [
    fault(
      [...path, stray],
      `expected ${stray} only beside when, got it beside from and to; move ${stray === 'before' ? 'from' : 'to'} instead`,
    ),
  ];
};

const whenFaults = ({ when }: Entry, names: readonly string[], path: readonly PropertyKey[]): Fault[] => {
  if (!isSet(when)) return [];
  const set = COMPARISONS.filter((key) => isSet(when[key]));
  const faults = nameFault(when.signal, names, [...path, 'when', 'signal']);
  if (set.length === 1) return faults;
  const got = set.length === 0 ? 'none' : set.join(' and ');
  return [...faults, fault([...path, 'when'], `expected one of the keys ${COMPARISONS.join(', ')}, got ${got}`)];
};

/** Lists what does not fit together in the entries, and names that no signal or input has. */
export const excludeFaults = (entries: readonly Entry[], names: readonly string[]): readonly Fault[] =>
  entries.flatMap((entry, i) => {
    const path = ['exclude', i];
    return [
      ...spanFaults(entry, path),
      ...whenFaults(entry, names, path),
      ...(entry.signals ?? []).flatMap((name, k) => nameFault(name, names, [...path, 'signals', k])),
    ];
  });

/** An entry that has no faults, with its defaults. */
export const toExclusion = (entry: Entry): Exclusion => {
  const { reason, when } = entry;
  const signals = entry.signals ?? null;
  if (!isSet(when)) return { reason, signals, fromMs: entry.from as number, toMs: entry.to as number };
  const is = COMPARISONS.find((key) => isSet(when[key])) ?? 'equals';
  return {
    reason,
    signals,
    when: { signal: when.signal, is, level: when[is] as number },
    beforeMs: entry.before ?? 0,
    afterMs: entry.after ?? 0,
  };
};

/** The entry as it stands in YAML. */
export const plainExclusion = (entry: Exclusion): Record<string, unknown> => {
  const signals = entry.signals === null ? {} : { signals: entry.signals };
  const { reason } = entry;
  if ('fromMs' in entry) {
    return { from: shortInstant(entry.fromMs), to: shortInstant(entry.toMs), ...signals, reason };
  }
  const { when, beforeMs, afterMs } = entry;
  return {
    when: { signal: when.signal, [when.is]: when.level },
    ...(beforeMs === 0 ? {} : { before: formatDuration(beforeMs) }),
    ...(afterMs === 0 ? {} : { after: formatDuration(afterMs) }),
    ...signals,
    reason,
  };
};

const shortInstant = (timeMs: number): string => formatInstant(timeMs).replace('.000Z', 'Z');
