/** So many at once, and so many a second: how often something may be asked for. Time is the caller's. */

/** How many at once, and how many a second. */
export interface Allowance {
  readonly burst: number;
  readonly perSecond: number;
}

/** A bucket that fills with time. */
export class TokenBucket {
  readonly #allowance: Allowance;
  #tokens: number;
  #atMs: number;

  /** Full at first. nowMs  of a clock that never steps back */
  constructor(allowance: Allowance, nowMs: number) {
    this.#allowance = allowance;
    this.#tokens = allowance.burst;
    this.#atMs = nowMs;
  }

  /** Takes one out; false: there is none. */
  take(nowMs: number): boolean {
    this.#fill(nowMs);
    if (this.#tokens < 1) return false;
    this.#tokens--;
    return true;
  }

  #fill(nowMs: number): void {
    const { burst, perSecond } = this.#allowance;
    this.#tokens = Math.min(burst, this.#tokens + ((nowMs - this.#atMs) / 1000) * perSecond);
    this.#atMs = nowMs;
  }
}
