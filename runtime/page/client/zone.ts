/** Times as the site's clocks show them. */

const DAY_MS = 86_400_000;
const MINUTE_MS = 60_000;

/** Writes times in one zone. */
export class Zone {
  readonly name: string;
  readonly #minute: Intl.DateTimeFormat;
  readonly #second: Intl.DateTimeFormat;
  readonly #day: Intl.DateTimeFormat;
  readonly #date: Intl.DateTimeFormat;
  readonly #parts: Intl.DateTimeFormat;

  /** name  IANA zone; UTC where the browser does not know it */
  constructor(name: string) {
    this.name = isKnown(name) ? name : 'UTC';
    const make = (options: Intl.DateTimeFormatOptions): Intl.DateTimeFormat =>
      new Intl.DateTimeFormat('en-GB', { timeZone: this.name, hourCycle: 'h23', ...options });
    this.#minute = make({ hour: '2-digit', minute: '2-digit' });
    this.#second = make({ hour: '2-digit', minute: '2-digit', second: '2-digit' });
    this.#day = make({ day: 'numeric', month: 'short' });
    this.#date = make({ day: 'numeric', month: 'short', year: 'numeric' });
    this.#parts = make({
      year: 'numeric',
      month: 'numeric',
      day: 'numeric',
      hour: 'numeric',
      minute: 'numeric',
      second: 'numeric',
    });
  }

  /** Hours and minutes; seconds where ticks are that short. */
  clock(ms: number, stepMs = MINUTE_MS): string {
    return (stepMs < MINUTE_MS ? this.#second : this.#minute).format(ms);
  }

  day(ms: number): string {
    return this.#day.format(ms);
  }

  date(ms: number): string {
    return `${this.#date.format(ms)}, ${this.#minute.format(ms)}`;
  }

  /** The clock alone where that is unmistakable, else with the day. */
  near(ms: number, nowMs: number, stepMs = MINUTE_MS): string {
    const isNear = Math.abs(ms - nowMs) < DAY_MS / 2 || this.day(ms) === this.day(nowMs);
    return isNear ? this.clock(ms, stepMs) : `${this.day(ms)} ${this.clock(ms, stepMs)}`;
  }

  /** How far the zone's clocks are ahead of UTC at a moment, ms. */
  offsetMs(ms: number): number {
    const parts = Object.fromEntries(this.#parts.formatToParts(ms).map(({ type, value }) => [type, Number(value)]));
    const local = Date.UTC(parts.year!, parts.month! - 1, parts.day, parts.hour, parts.minute, parts.second);
    return local - Math.floor(ms / 1000) * 1000;
  }
}

function isKnown(name: string): boolean {
  try {
    new Intl.DateTimeFormat('en-GB', { timeZone: name });
    return true;
  } catch {
    return false;
  }
}
