/**
 * Times of a history file: ISO 8601 in the profile of RFC 3339 (a blank for the T, seconds and zone may be missing), or a
 * count since 1970 in seconds or milliseconds. One kind a file; the first row decides. Other orders of day and month are
 * refused, since no program can know them.
 */
import type { ClockChange, TimeKind } from './history.ts';
import { textOfBytes } from './numbers.ts';
import { shown } from './refusal.ts';
import { type Resolved, ZoneRules } from './zone.ts';

/** Counts below are no times since 1970 in seconds (1973) but mere row numbers. */
const FIRST_EPOCH_S = 1e8;
/** Counts from here on are milliseconds: as seconds they would lie past the year 5138. */
const FIRST_EPOCH_MS = 1e11;
const LAST_EPOCH_MS = 4.2e12;
const DAYS_IN_MONTH = [31, 29, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31];
const BLANK = 32;

/** Why a field is no time: what was expected, and what to do. */
export interface TimeProblem {
  readonly expected: string;
  readonly remedy: string;
}

const WRITE_ISO = 'write times as 2024-03-31T01:00:00Z, or as seconds or milliseconds since 1970';
const NO_TIME: TimeProblem = { expected: 'a time in ISO 8601', remedy: WRITE_ISO };
const DAY_FIRST: TimeProblem = {
  expected: 'a time in ISO 8601, year first',
  remedy: `the order of day and month cannot be told: ${WRITE_ISO}`,
};
const ROW_NUMBER: TimeProblem = {
  expected: 'a time, seconds or milliseconds since 1970',
  remedy: `this looks like a row number: ${WRITE_ISO}`,
};
const TOO_FINE: TimeProblem = {
  expected: 'seconds or milliseconds since 1970',
  remedy: `the count is too large, perhaps micro- or nanoseconds: ${WRITE_ISO}`,
};
const NO_ZONE: TimeProblem = {
  expected: 'a time with a zone',
  remedy: 'say where its clock stood, for instance --time-zone Europe/London, or time_zone in the site file',
};

/** Where a reader of times stands. */
export interface TimeState {
  readonly kind: TimeKind | null;
  readonly rising: number;
  readonly isZoned: boolean;
  readonly changes: readonly (readonly [
    atMs: number,
    found: { readonly kind: 'skipped' | 'doubled'; readonly first: number; readonly second: number },
  ])[];
}

/** Reads times of one source in file order; shared by the files of one history, so that a doubled hour may span two. */
export class TimeReader {
  readonly #zoneName: string | null;
  /** Zone in use, and what its changes did: the same for the files of one history that are read side by side. */
  readonly #shared: {
    zone: ZoneRules | null;
    readonly changes: Map<number, { kind: 'skipped' | 'doubled'; first: number; second: number }>;
  };
  readonly #resolved: Resolved = { utcMs: 0, kind: 'plain', changeMs: 0 };
  #cachedDate = -1;
  #cachedDayMs = 0;
  #at = 0;
  /** Steps forward less steps back so far in this file: negative where it is written newest first. */
  #rising = 0;
  kind: TimeKind | null = null;
  /** Set where `read` answered NaN. */
  problem: TimeProblem = NO_TIME;

  /**
   * zoneName  IANA name or fixed offset for times that carry none; null: such times are refused
   * beside    reader of another file of the same history; null: alone
   */
  constructor(zoneName: string | null, beside: TimeReader | null = null) {
    this.#zoneName = zoneName;
    this.#shared = beside === null ? { zone: null, changes: new Map() } : beside.#shared;
  }

  /** Forgets the kind of time before the next file. */
  nextFile(): void {
    this.kind = null;
    this.#rising = 0;
  }

  /** What of this file's times tells the next ones, and the clock changes met, as plain data. */
  state(): TimeState {
    return {
      kind: this.kind,
      rising: this.#rising,
      isZoned: this.#shared.zone !== null,
      changes: [...this.#shared.changes],
    };
  }

  /** Goes on from an earlier run. */
  restore({ kind, rising, isZoned, changes }: TimeState): void {
    this.kind = kind;
    this.#rising = rising;
    if (isZoned && this.#zoneName !== null) this.#shared.zone ??= new ZoneRules(this.#zoneName);
    for (const [at, found] of changes) this.#shared.changes.set(at, { ...found });
  }

  /** Zone that was needed; null where every time carried its own. */
  get zone(): string | null {
    return this.#shared.zone?.name ?? null;
  }

  /** What clock changes did so far, by instant. */
  get changes(): readonly ClockChange[] {
    return [...this.#shared.changes]
      .sort((a, b) => a[0] - b[0])
      .map(([atMs, found]) => ({ atMs, ...(this.#shared.zone as ZoneRules).describe(atMs), ...found }));
  }

  /**
   * Reads bytes[from, to) as a time, ms since 1970 UTC; NaN where it is none, `problem` then says why.
   *
   * previousMs  time of the row or reading before, which tells the two passes of a doubled hour apart; -Infinity at first
   */
  read(bytes: Uint8Array, from: number, to: number, previousMs: number): number {
    const ms = this.#read(bytes, from, to, previousMs);
    if (ms > previousMs) this.#rising++;
    else if (ms < previousMs) this.#rising--;
    return ms;
  }

  #read(bytes: Uint8Array, from: number, to: number, previousMs: number): number {
    if (to - from >= 8 && bytes[from + 4] === 45) return this.#iso(bytes, from, to, previousMs);
    const text = textOfBytes(bytes, from, to);
    if (/^[+-]?\d+(\.\d*)?([eE][+-]?\d+)?$/.test(text)) return this.#epoch(Number(text));
    return this.#refuse(/^\d{1,2}[/.-]\d{1,2}[/.-]\d{2,4}/.test(text) ? DAY_FIRST : NO_TIME);
  }

  /** As `read`, of a text. */
  readText(text: string, previousMs: number): number {
    const bytes = Buffer.from(text.trim());
    return this.read(bytes, 0, bytes.length, previousMs);
  }

  /** A count since 1970, as JSON numbers give it. */
  readNumber(value: number): number {
    return this.#epoch(value);
  }

  /** A local time without a zone, ms as if it were UTC, as columns of times hold it. */
  readLocal(localMs: number, previousMs: number): number {
    const ms = this.#local(localMs, previousMs);
    if (ms > previousMs) this.#rising++;
    else if (ms < previousMs) this.#rising--;
    return ms;
  }

  /** An instant, ms since 1970 UTC, as columns of times with a zone hold it. */
  readInstant(utcMs: number): number {
    return this.#isKind('ISO with zone') ? utcMs : Number.NaN;
  }

  #refuse(problem: TimeProblem): number {
    this.problem = problem;
    return Number.NaN;
  }

  #isKind(kind: TimeKind): boolean {
    if (this.kind === kind) return true;
    if (this.kind === null) {
      this.kind = kind;
      return true;
    }
    this.problem = {
      expected: `${this.kind} as in the rows before`,
      remedy: `this one is ${kind}: write all times of a file alike`,
    };
    return false;
  }

  #epoch(value: number): number {
    if (!(value >= FIRST_EPOCH_S)) return this.#refuse(ROW_NUMBER);
    if (value > LAST_EPOCH_MS) return this.#refuse(TOO_FINE);
    const isSeconds = value < FIRST_EPOCH_MS;
    if (!this.#isKind(isSeconds ? 'epoch seconds' : 'epoch milliseconds')) return Number.NaN;
    return isSeconds ? Math.round(value * 1000) : value;
  }

  #iso(bytes: Uint8Array, from: number, to: number, previousMs: number): number {
    const year = this.#digits(bytes, from, to, 4);
    this.#at++;
    const month = this.#digits(bytes, this.#at, to, 2);
    if (bytes[this.#at] !== 45) return this.#refuse(NO_TIME);
    const day = this.#digits(bytes, this.#at + 1, to, 2);
    if (!(year >= 1 && month >= 1 && month <= 12 && day >= 1 && day <= (DAYS_IN_MONTH[month - 1] as number)))
      return this.#refuse(NO_TIME);
    const dayMs = this.#dayMs(year, month, day);
    if (Number.isNaN(dayMs)) return this.#refuse(NO_TIME);
    let at = this.#at;
    let clockMs = 0;
    if (at < to) {
      const join = bytes[at] as number;
      if (join !== 84 && join !== 116 && join !== BLANK) return this.#refuse(NO_TIME);
      clockMs = this.#clock(bytes, at + 1, to);
      if (Number.isNaN(clockMs)) return this.#refuse(NO_TIME);
      at = this.#at;
      while (at < to && bytes[at] === BLANK) at++;
    }
    if (at === to) return this.#local(dayMs + clockMs, previousMs);
    const offsetMs = this.#offset(bytes, at, to);
    if (Number.isNaN(offsetMs)) return this.#refuse(NO_TIME);
    return this.#isKind('ISO with zone') ? dayMs + clockMs - offsetMs : Number.NaN;
  }

  /** Midnight UTC of a date, remembered since rows of one day follow each other; NaN for 31 April and the like. */
  #dayMs(year: number, month: number, day: number): number {
    const key = year * 10_000 + month * 100 + day;
    if (key !== this.#cachedDate) {
      const ms = Date.UTC(year, month - 1, day);
      if (new Date(ms).getUTCDate() !== day) return Number.NaN;
      this.#cachedDate = key;
      this.#cachedDayMs = ms;
    }
    return this.#cachedDayMs;
  }

  /** HH:MM, HH:MM:SS or with a fraction; a leap second counts as the second after it, as on the POSIX axis. */
  #clock(bytes: Uint8Array, from: number, to: number): number {
    const hour = this.#digits(bytes, from, to, 2);
    if (bytes[this.#at] !== 58) return Number.NaN;
    const minute = this.#digits(bytes, this.#at + 1, to, 2);
    let seconds = 0;
    if (this.#at < to && bytes[this.#at] === 58) {
      seconds = this.#digits(bytes, this.#at + 1, to, 2);
      if (this.#at < to && (bytes[this.#at] === 46 || bytes[this.#at] === 44)) {
        let weight = 0.1;
        let digits = 0;
        for (this.#at++; this.#at < to; this.#at++, digits++) {
          const digit = (bytes[this.#at] as number) - 48;
          if (digit < 0 || digit > 9) break;
          seconds += digit * weight;
          weight /= 10;
        }
        if (digits === 0) return Number.NaN;
      }
    }
    if (!(hour <= 24 && minute < 60 && seconds < 61) || (hour === 24 && minute + seconds > 0)) return Number.NaN;
    return (hour * 60 + minute) * 60_000 + Math.round(seconds * 1000);
  }

  /** Z, ±HH, ±HHMM or ±HH:MM to the end of the field, ms east of UTC. */
  #offset(bytes: Uint8Array, from: number, to: number): number {
    const sign = bytes[from] as number;
    if (sign === 90 || sign === 122) return to - from === 1 ? 0 : Number.NaN;
    if (sign !== 43 && sign !== 45) return Number.NaN;
    const hours = this.#digits(bytes, from + 1, to, 2);
    let minutes = 0;
    if (this.#at < to) minutes = this.#digits(bytes, this.#at + (bytes[this.#at] === 58 ? 1 : 0), to, 2);
    if (this.#at !== to || !(hours < 24 && minutes < 60)) return Number.NaN;
    const ms = (hours * 60 + minutes) * 60_000;
    return sign === 45 ? -ms : ms;
  }

  #local(localMs: number, previousMs: number): number {
    if (this.#zoneName === null) return this.#refuse(NO_ZONE);
    if (!this.#isKind('ISO without zone')) return Number.NaN;
    this.#shared.zone ??= new ZoneRules(this.#zoneName);
    const resolved = this.#resolved;
    this.#shared.zone.resolve(localMs, previousMs, this.#rising < 0, resolved);
    if (resolved.kind !== 'plain') this.#note(resolved);
    return resolved.utcMs;
  }

  #note(resolved: Resolved): void {
    let found = this.#shared.changes.get(resolved.changeMs);
    if (!found) {
      found = { kind: resolved.kind === 'skipped' ? 'skipped' : 'doubled', first: 0, second: 0 };
      this.#shared.changes.set(resolved.changeMs, found);
    }
    if (resolved.kind === 'second') found.second++;
    else found.first++;
  }

  /** `count` digits from `from`, leaving #at behind them; NaN where they are not there. */
  #digits(bytes: Uint8Array, from: number, to: number, count: number): number {
    let value = 0;
    for (let at = from; at < from + count; at++) {
      const digit = at < to ? (bytes[at] as number) - 48 : -1;
      if (digit < 0 || digit > 9) return Number.NaN;
      value = value * 10 + digit;
    }
    this.#at = from + count;
    return value;
  }
}

/** A field that is no time, as a refusal shows it. */
export function shownTime(bytes: Uint8Array, from: number, to: number): string {
  return shown(textOfBytes(bytes, from, to));
}
