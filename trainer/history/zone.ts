/**
 * Local clock time to UTC by the IANA time zone database that comes with the platform's Intl: transitions are found once
 * by sampling and bisection, then a look-up a row. Around clock changes a local time may not exist, or exist twice; the
 * answer says which, and the caller counts it.
 *
 * Changes closer together than ten days are not seen (none since 1970 is known to us), nor are rules past 2100.
 */
import { TrainError } from '../errors.ts';

const DAY_MS = 86_400_000;
const SAMPLE_MS = 10 * DAY_MS;
const FIRST_MS = Date.UTC(1970, 0, 1);
const LAST_MS = Date.UTC(2100, 0, 1);
const FIXED = /^(?:UTC|GMT)?([+-])(\d{2}):?(\d{2})$/;

/**
 * The IANA name of a fixed offset of whole hours, whose sign counts the other way ("+02:00" is "Etc/GMT-2"); other names
 * as they are.
 */
export function fixedZoneName(zone: string): string {
  const fixed = FIXED.exec(zone);
  if (!fixed) return zone;
  const hours = Number(fixed[2]);
  if (fixed[3] !== '00' || hours > 12)
    throw new TrainError(
      'options',
      `time zone: expected an IANA name or an offset of whole hours for a site file, got "${zone}"; name the zone, such as "Asia/Kolkata"`,
    );
  return hours === 0 ? 'UTC' : `Etc/GMT${fixed[1] === '+' ? '-' : '+'}${hours}`;
}

/** Local time at an instant, as text "GMT+01:00", from the platform. */
function offsetReader(zone: string): (utcMs: number) => number {
  let format: Intl.DateTimeFormat;
  try {
    format = new Intl.DateTimeFormat('en-US', { timeZone: zone, timeZoneName: 'longOffset' });
  } catch (cause) {
    throw new TrainError(
      'options',
      `time zone: expected an IANA name such as "Europe/London" or an offset such as "+02:00", got "${zone}"; check the spelling`,
      { cause },
    );
  }
  return (utcMs) => {
    const match = /GMT(?:([+-])(\d{2}):(\d{2})(?::(\d{2}))?)?$/.exec(format.format(utcMs));
    if (!match?.[1]) return 0;
    const seconds = Number(match[2]) * 3600 + Number(match[3]) * 60 + Number(match[4] ?? 0);
    return (match[1] === '-' ? -seconds : seconds) * 1000;
  };
}

/**
 * Refuses a zone that is not known, though no time may need it: a mistyped one must not pass unseen.
 *
 * throws  TrainError 'options'
 */
export function checkZone(zone: string): void {
  if (!FIXED.test(zone)) offsetReader(zone);
}

/** A local time's place on the UTC axis. */
export interface Resolved {
  utcMs: number;
  /** 'plain', or what the clock change `changeMs` did to it. */
  kind: 'plain' | 'skipped' | 'first' | 'second';
  changeMs: number;
}

/** The rules of one zone. */
export class ZoneRules {
  readonly name: string;
  /** Instants of the changes, ascending. */
  readonly changes: readonly number[];
  /** offsets[k] holds before changes[k]; the last holds after all. ms east of UTC. */
  readonly offsets: readonly number[];
  #at = 0;

  /** throws  TrainError 'options' where the zone is not known */
  constructor(name: string) {
    this.name = name;
    const fixed = FIXED.exec(name);
    if (fixed) {
      const ms = (Number(fixed[2]) * 60 + Number(fixed[3])) * 60_000;
      this.changes = [];
      this.offsets = [fixed[1] === '-' ? -ms : ms];
      return;
    }
    const offsetAt = offsetReader(name);
    const changes: number[] = [];
    const offsets = [offsetAt(FIRST_MS)];
    for (let from = FIRST_MS; from < LAST_MS; from += SAMPLE_MS) {
      const before = offsets.at(-1) as number;
      const after = offsetAt(from + SAMPLE_MS);
      if (after === before) continue;
      let low = from;
      let high = from + SAMPLE_MS;
      while (high - low > 1000) {
        const middle = Math.floor((low + high) / 2000) * 1000;
        if (offsetAt(middle) === before) low = middle;
        else high = middle;
      }
      changes.push(high);
      offsets.push(after);
    }
    this.changes = changes;
    this.offsets = offsets;
  }

  /** Offset in force at an instant, ms east of UTC. */
  offsetAt(utcMs: number): number {
    let k = 0;
    while (k < this.changes.length && utcMs >= (this.changes[k] as number)) k++;
    return this.offsets[k] as number;
  }

  /**
   * Resolves a local time, written as if it were UTC, into `out`.
   *
   * A doubled time is the second pass where the first would not come after `previousMs`, the UTC time of the reading
   * before it in the file; in a file written newest first, as long as the second pass lies before that reading. A skipped
   * time is read with the offset in force before the change (RFC 5545 section 3.3.5).
   */
  resolve(localMs: number, previousMs: number, isDescending: boolean, out: Resolved): void {
    const { changes, offsets } = this;
    let k = this.#at;
    while (k > 0 && localMs < (changes[k - 1] as number) + Math.min(offsets[k - 1] as number, offsets[k] as number))
      k--;
    while (
      k < changes.length &&
      localMs >= (changes[k] as number) + Math.max(offsets[k] as number, offsets[k + 1] as number)
    )
      k++;
    this.#at = k;
    out.kind = 'plain';
    out.utcMs = localMs - (offsets[k] as number);
    if (!this.#changed(k - 1, localMs, previousMs, isDescending, out))
      this.#changed(k, localMs, previousMs, isDescending, out);
  }

  /** Settles a local time that change `c` skips or doubles; false where it does neither. */
  #changed(c: number, localMs: number, previousMs: number, isDescending: boolean, out: Resolved): boolean {
    if (c < 0 || c >= this.changes.length) return false;
    const change = this.changes[c] as number;
    const before = this.offsets[c] as number;
    const after = this.offsets[c + 1] as number;
    if (localMs < change + Math.min(before, after) || localMs >= change + Math.max(before, after)) return false;
    out.changeMs = change;
    const first = localMs - before;
    const second = localMs - after;
    if (after > before) {
      out.kind = 'skipped';
      out.utcMs = first;
      return true;
    }
    const isSecond = isDescending ? second < previousMs : first <= previousMs;
    out.kind = isSecond ? 'second' : 'first';
    out.utcMs = isSecond ? second : first;
    return true;
  }

  /** Length of the skipped or doubled local time at a change, ms, and the offset in force before it, as "+01:00". */
  describe(changeMs: number): { readonly spanMs: number; readonly offsetBefore: string } {
    const k = this.changes.indexOf(changeMs);
    const before = this.offsets[k] as number;
    const minutes = Math.abs(before) / 60_000;
    const two = (value: number): string => String(Math.floor(value)).padStart(2, '0');
    return {
      spanMs: Math.abs((this.offsets[k + 1] as number) - before),
      offsetBefore: `${before < 0 ? '-' : '+'}${two(minutes / 60)}:${two(minutes % 60)}`,
    };
  }
}
