/** The desk's status as tables. */
import { momentText, shortNumber, spanText, textTable } from '../text-table.ts';
import type { SiteStatus } from './status.ts';

/** Tables for a terminal. */
export function statusText(statuses: readonly SiteStatus[]): string {
  if (statuses.length === 0) return 'Nothing received yet.';
  const head = [
    'site',
    'segments',
    'doubled',
    'conflicts',
    'waiting',
    'broken',
    'refused',
    'archived to',
    'span',
    'bits/reading',
    'last seen',
  ];
  const rows = statuses.map((status) => [
    status.site,
    String(status.segments),
    String(status.doubled),
    String(status.conflicts),
    String(status.waitingForBundle + status.waitingForPredecessor),
    String(status.broken),
    String(status.refused),
    momentText(status.toMs),
    status.fromMs === null || status.toMs === null ? '-' : spanText(status.toMs - status.fromMs),
    status.bitsPerReading === null ? '-' : status.bitsPerReading.toFixed(2),
    momentText(status.lastSeenMs),
  ]);
  return [textTable(head, rows, [1, 2, 3, 4, 5, 6, 8, 9]), ...statuses.map(siteText)].filter(Boolean).join('\n\n');
}

/** What the byte budget took away. */
function coarseText({ coarse, coarseTicks, ticks }: SiteStatus): string {
  const share = `${coarseTicks} of ${ticks} ticks hold readings coarser than their sensors, to save bytes`;
  if (coarse.length === 0) return `  ${share}; full resolution now`;
  return `  ${share}; now ${coarse.map(({ channel, steps }) => `${channel} in ${steps} steps at a time`).join(', ')}`;
}

function siteText(status: SiteStatus): string {
  const notes = [
    ...status.waitsFor.map((what) => `  waits for ${what}`),
    ...(status.coarseTicks === 0 ? [] : [coarseText(status)]),
    ...(status.brokenReason === null ? [] : [`  broken: ${status.brokenReason}`]),
    ...(status.refusedReason === null ? [] : [`  last refused: ${status.refusedReason}`]),
  ];
  const head = ['signal', 'residuals', 'bias', 'sd ratio', 'bias, 7 d', 'sd ratio, 7 d'];
  const rows = status.residuals.map((one) => [
    one.signal,
    String(one.count),
    shortNumber(one.bias, 3),
    shortNumber(one.sdRatio, 3),
    shortNumber(one.recentBias, 3),
    shortNumber(one.recentSdRatio, 3),
  ]);
  if (rows.length === 0 && notes.length === 0) return '';
  const title = `${status.site}${status.bundle === null ? '' : `, bundle ${status.bundle.slice(0, 16)}…`}`;
  const table = rows.length === 0 ? [] : [textTable(head, rows, [1, 2, 3, 4, 5])];
  const reading =
    rows.length === 0
      ? []
      : ['  bias and spread of the one-step residual as shares of what the bundle expected (0 and 1: as expected)'];
  return [title, ...notes, ...table, ...reading].join('\n');
}
