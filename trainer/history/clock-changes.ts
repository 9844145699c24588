/**
 * Trouble around clock changes, for times that carry no zone: one finding for each change the history meets.
 */
import { counted, type Finding, iso, lengthOf } from './finding.ts';
import type { ClockChange, History } from './history.ts';

function skipped(change: ClockChange, zone: string): Finding {
  const span = lengthOf(change.spanMs);
  return {
    kind: 'clock-change',
    weight: 'serious',
    signal: null,
    from: iso(change.atMs),
    to: iso(change.atMs + change.spanMs),
    count: change.first,
    sentence: `${counted(change.first, 'time')} lie in the ${span} that clocks in ${zone} skipped at ${iso(change.atMs)}: the logger's clock did not change then. They were read with the offset before the change.`,
    advice: `If its clock never changes, declare its fixed offset: --time-zone ${change.offsetBefore}.`,
  };
}

function doubled(change: ClockChange, zone: string): Finding {
  const span = lengthOf(change.spanMs);
  const isResolved = change.second > 0 && change.first > 0;
  return {
    kind: 'clock-change',
    weight: isResolved ? 'note' : 'look',
    signal: null,
    from: iso(change.atMs - change.spanMs),
    to: iso(change.atMs + change.spanMs),
    count: change.first + change.second,
    sentence: isResolved
      ? `Clocks in ${zone} went through the same ${span} twice around ${iso(change.atMs)}; the order of the rows told ${counted(change.first, 'time')} of the first pass from ${change.second} of the second.`
      : `Clocks in ${zone} went through the same ${span} twice around ${iso(change.atMs)}, but the history holds one pass only (${counted(change.first + change.second, 'time')}); it was taken as the ${change.first > 0 ? 'first' : 'second'}.`,
    advice: isResolved
      ? 'Nothing to do; times written with their zone need no such guess.'
      : `Readings of one pass are missing, or the logger’s clock does not change: then declare its fixed offset, for instance --time-zone ${change.offsetBefore}.`,
  };
}

/** Findings by change, in order of time. */
export function clockChangeFindings(history: History): Finding[] {
  const zone = history.zone ?? '';
  return history.clockChanges.map((change) =>
    change.kind === 'skipped' ? skipped(change, zone) : doubled(change, zone),
  );
}
