/**
 * Who takes over from a filter that went astray: the same bundle afresh, the other one, or none. A bundle that fails on what
 * was read here, by an error or by numbers that are not finite, is condemned: no start puts it to work again.
 */
import type { BundleKeeper } from '../bundle/change.ts';
import type { Disk } from '../disk.ts';
import type { RecentTicks } from '../ingest/recent.ts';
import type { CheckedBundle, PlanSource, Serving } from '../serving.ts';
import { Condemned } from './condemned.ts';
import { Ladder, type LadderAction } from './ladder.ts';
import { warmed } from './warmed.ts';

/** What it is made of. */
export interface TakeoverOptions {
  readonly keeper: BundleKeeper;
  readonly disk: Disk;
  /** The data folder. */
  readonly folder: string;
  readonly recent: RecentTicks;
  readonly plans: PlanSource;
  readonly note: (level: 'info' | 'warn', text: string) => void;
}

/** See the file head. */
export class Takeover {
  readonly ladder = new Ladder();
  readonly #options: TakeoverOptions;
  readonly #condemned: Condemned;
  #failure = '';

  constructor(options: TakeoverOptions) {
    this.#options = options;
    this.#condemned = new Condemned(options.disk, options.folder);
  }

  /** Bundles on disk that have not failed here, the pointer's first. */
  get fit(): readonly CheckedBundle[] {
    return this.#options.keeper.usable.filter((checked) => !this.isCondemned(checked));
  }

  isCondemned({ digest }: CheckedBundle): boolean {
    return this.#condemned.has(digest);
  }

  /** Whether the filter took the tick in; anything else is a failure of the bundle, not of the gateway. */
  stepped(serving: Serving, tick: number, values: Float64Array): boolean {
    try {
      serving.step(tick, values);
      if (serving.isSound) return true;
      this.#failure = 'numbers that are not finite';
    } catch (error) {
      this.#failure = (error as Error).message;
    }
    return false;
  }

  /** A filter that has taken in the recent ticks before `next`, or none where they end earlier; null: it fails on them. */
  tried(checked: CheckedBundle, next: number | null): Serving | null {
    const { recent, plans } = this.#options;
    try {
      const serving = warmed(checked, recent, next);
      serving.plans = plans;
      serving.replan();
      if (serving.isSound) return serving;
      this.#condemn(checked, 'numbers that are not finite');
    } catch (error) {
      this.#condemn(checked, (error as Error).message);
    }
    return null;
  }

  /** A bundle that a person sent, or the first one: nothing is held against it. null: it fails at once. */
  installed(checked: CheckedBundle, next: number | null): Serving | null {
    const serving = this.tried(checked, next);
    if (serving === null) return null;
    this.#condemned.pardon(checked.digest);
    this.ladder.clear();
    return serving;
  }

  /** What takes over from a filter that failed on a tick. */
  afterFailure(serving: Serving, tick: number): Serving | null {
    const action = this.ladder.failed(tick, this.#failure);
    if (action !== 'reset') this.#condemn(serving.checked, this.#failure);
    return this.after(serving, action, tick);
  }

  /** What takes over before tick `next`; null: nothing is fit, and readings are held. */
  after(serving: Serving, action: LadderAction, next: number): Serving | null {
    const { keeper, note } = this.#options;
    note('warn', `the filter went astray (${this.ladder.present!.reason}): ${action}`);
    const other = this.fit.find(({ digest }) => Buffer.compare(digest, serving.digest) !== 0);
    const checked = { reset: serving.checked, 'previous-bundle': other, holding: undefined }[action];
    const after = checked === undefined ? null : this.tried(checked, next);
    if (after !== null && action === 'previous-bundle') this.#guard(() => keeper.serves(after.checked));
    if (after === null && action !== 'holding') this.ladder.holds(next);
    return after;
  }

  /** The filter tried again after a long hold, on what was read meanwhile; null: not yet, or it fails again. */
  retried({ checked }: Serving, tick: number): Serving | null {
    if (!this.ladder.isRetryDue(tick)) return null;
    this.ladder.retried(tick);
    const after = this.tried(checked, tick + 1);
    if (after === null) this.ladder.holds(tick);
    return after;
  }

  #condemn({ digest, sequence }: CheckedBundle, why: string): void {
    this.#condemned.add(digest, why);
    this.#options.note('warn', `the bundle of sequence ${sequence} failed on what was read here: ${why}`);
  }

  /** A disk that takes nothing must not keep a bundle from serving. */
  #guard(work: () => void): void {
    try {
      work();
    } catch (error) {
      this.#options.note('warn', `pointer: ${(error as Error).message}`);
    }
  }
}
