/**
 * Who may ask how often. Askers name themselves, so a bucket an asker keeps one from crowding out the others by mistake; what
 * protects the gateway are the buckets for all of them: of questions read at all, of answers, and of refusals, which cost
 * little but must not become a flood of ours.
 */
import { type Allowance, TokenBucket } from '../token-bucket.ts';

/** Questions of one asker. */
const ASKER: Allowance = { burst: 10, perSecond: 0.5 };
/** Answers in all: a few ms of work each on a small machine. */
const ALL: Allowance = { burst: 20, perSecond: 4 };
/** Questions read at all. */
const READ: Allowance = { burst: 50, perSecond: 20 };
/** Refusals said. */
const REFUSALS: Allowance = { burst: 20, perSecond: 4 };
/** Askers remembered; a newer one takes the place of whoever asked longest ago. */
const MOST_ASKERS = 64;

/** See the file head. */
export class Allowances {
  readonly #now: () => number;
  readonly #all: TokenBucket;
  readonly #read: TokenBucket;
  readonly #refusals: TokenBucket;
  /** In the order in which they asked last. */
  readonly #askers = new Map<string, TokenBucket>();

  /** now  ms of a clock that never steps back */
  constructor(now: () => number) {
    this.#now = now;
    this.#all = new TokenBucket(ALL, now());
    this.#read = new TokenBucket(READ, now());
    this.#refusals = new TokenBucket(REFUSALS, now());
  }

  /** Askers remembered now. */
  get askers(): number {
    return this.#askers.size;
  }

  /** Whether a question may be read. */
  mayRead(): boolean {
    return this.#read.take(this.#now());
  }

  /** Whether a refusal may be said. */
  mayRefuse(): boolean {
    return this.#refusals.take(this.#now());
  }

  /** Why an asker gets no answer now; null: it may have one. */
  refusalOf(asker: string): { readonly cause: 'asker-rate' | 'rate'; readonly reason: string } | null {
    const now = this.#now();
    const bucket = this.#askers.get(asker) ?? new TokenBucket(ASKER, now);
    this.#askers.delete(asker);
    this.#askers.set(asker, bucket);
    if (this.#askers.size > MOST_ASKERS) this.#askers.delete(this.#askers.keys().next().value!);
    if (!bucket.take(now)) return { cause: 'asker-rate', reason: told('one asker', ASKER) };
    if (!this.#all.take(now)) return { cause: 'rate', reason: told('all askers together', ALL) };
    return null;
  }
}

function told(who: string, { burst, perSecond }: Allowance): string {
  return `questions: expected at most ${burst} at once and ${perSecond} a second of ${who}, got more; ask again later`;
}
