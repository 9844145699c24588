/**
 * Time that perhaps should not teach, found in a history: for a person to look at and, if it was maintenance or a fault,
 * to paste into the site file. Nothing here is ever applied by itself: what looks odd may be the plant at its most
 * instructive.
 */
import { formatExclude } from '@stillwell/protocol';
import { figure, iso } from './finding.ts';
import { oddDays } from './odd-days.ts';
import type { Series } from './series.ts';
import { type StuckStretch, stuckStretches } from './stuck.ts';
import type { ValuesSeen } from './values-seen.ts';

/** One suggestion; times ISO, UTC. */
export interface Suggestion {
  readonly from: string;
  readonly to: string;
  /** null: the whole plant. */
  readonly signals: readonly string[] | null;
  readonly reason: string;
}

/** The longest so many are suggested; a site file with more wants another look at its sensors first. */
const MOST = 12;
/** Stretches of several signals that begin and end within this share of their length are one event. */
const ALIKE = 0.05;

/**
 * Suggestions in order of time.
 *
 * series  without what the site file excludes already
 * seen    by channel
 */
export function suggestExclusions(series: Series, seen: readonly ValuesSeen[]): Suggestion[] {
  const stuck = together(series.values.flatMap((_, c) => stuckStretches(series, c, seen[c] as ValuesSeen)));
  const label = (index: number): string => iso((series.firstTick + index) * series.tickMs);
  const nameOf = (channel: number): string => series.names[channel] as string;
  const found: Suggestion[] = stuck.map((group) => ({
    from: label(Math.min(...group.map(({ fromIndex }) => fromIndex))),
    to: label(Math.max(...group.map(({ toIndex }) => toIndex))),
    signals: group.map(({ channel }) => nameOf(channel)),
    reason: `stands still at ${[...new Set(group.map((one) => atValue(one, seen)))].join(', ')}`,
  }));
  for (const { fromIndex, toIndex } of oddDays(series)) {
    const isStuck = stuck.some(
      (group) => group.length > 1 && group.every((one) => one.fromIndex < toIndex && one.toIndex > fromIndex),
    );
    if (isStuck) continue;
    found.push({ from: label(fromIndex), to: label(toIndex), signals: null, reason: 'unlike all other days' });
  }
  const length = ({ from, to }: Suggestion): number => Date.parse(to) - Date.parse(from);
  const longest = found.sort((a, b) => length(b) - length(a)).slice(0, MOST);
  return longest.sort((a, b) => Date.parse(a.from) - Date.parse(b.from));
}

/** Stretches of several signals that hang at once, grouped; the others each alone. */
function together(stretches: readonly StuckStretch[]): StuckStretch[][] {
  const groups: StuckStretch[][] = [];
  for (const one of [...stretches].sort((a, b) => a.fromIndex - b.fromIndex || a.channel - b.channel)) {
    const slack = Math.max(2, ALIKE * (one.toIndex - one.fromIndex));
    const group = groups.find(
      ([first]) =>
        first !== undefined &&
        Math.abs(first.fromIndex - one.fromIndex) <= slack &&
        Math.abs(first.toIndex - one.toIndex) <= slack,
    );
    if (group === undefined) groups.push([one]);
    else group.push(one);
  }
  return groups;
}

/** The value, and whether it is the end of all that was seen: a sensor at its stop rather than a link that hangs. */
function atValue({ channel, value }: StuckStretch, seen: readonly ValuesSeen[]): string {
  const { least, greatest } = seen[channel] as ValuesSeen;
  const end = value === greatest ? ' (its highest)' : value === least ? ' (its lowest)' : '';
  return `${figure(value)}${end}`;
}

/** The suggestions as YAML that may be pasted into a site file, set in by `indent`. */
export function suggestionsText(suggestions: readonly Suggestion[], indent = ''): string {
  const entries = suggestions.map(({ from, to, ...rest }) => ({
    ...rest,
    fromMs: Date.parse(from),
    toMs: Date.parse(to),
  }));
  return formatExclude(entries).trimEnd().replace(/^/gm, indent);
}
