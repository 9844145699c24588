/** Times given on the command line: ISO 8601 with a zone, or without one in the site's own time zone. */
import { parseInstant } from '@stillwell/protocol';
import { TrainError } from './errors.ts';
import { type Resolved, ZoneRules } from './history/zone.ts';

const LOCAL = /^(\d{4}-\d\d-\d\d)(?:[T ](\d\d:\d\d)(:\d\d)?)?$/;

/**
 * Milliseconds since 1970 UTC.
 *
 * throws  TrainError 'options' naming the option, expected and got
 */
function timeOption(option: string, text: string | undefined, zone: string): number | undefined {
  if (text === undefined) return undefined;
  const instant = parseInstant(text);
  if (instant !== null) return instant;
  const local = LOCAL.exec(text.trim());
  const asUtc = local && parseInstant(`${local[1]}T${local[2] ?? '00:00'}${local[3] ?? ':00'}Z`);
  if (asUtc === null) {
    throw new TrainError(
      'options',
      `${option}: expected a time such as 2026-03-01, 2026-03-01T06:00 or 2026-03-01T06:00:00Z, got "${text}".`,
      { details: { option, got: text } },
    );
  }
  const out: Resolved = { utcMs: 0, kind: 'plain', changeMs: 0 };
  new ZoneRules(zone).resolve(asUtc, Number.NEGATIVE_INFINITY, false, out);
  return out.utcMs;
}

/** Where the readings asked for start and end, as far as it was said. */
export interface TimeSpan {
  readonly fromMs?: number;
  readonly untilMs?: number;
}

/**
 * The options `--from` and `--until` together.
 *
 * throws  TrainError 'options' as timeOption does, and when nothing lies between them
 */
export function timeSpan(options: { readonly from?: string; readonly until?: string }, zone: string): TimeSpan {
  const fromMs = timeOption('--from', options.from, zone);
  const untilMs = timeOption('--until', options.until, zone);
  if (fromMs !== undefined && untilMs !== undefined && fromMs >= untilMs) {
    throw new TrainError(
      'options',
      `--until: expected a time after --from (${options.from}), got ${options.until}; change one of them`,
    );
  }
  return { ...(fromMs === undefined ? {} : { fromMs }), ...(untilMs === undefined ? {} : { untilMs }) };
}
