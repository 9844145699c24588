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
export function timeOption(option: string, text: string | undefined, zone: string): number | undefined {
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
