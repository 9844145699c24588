/**
 * How a bundle comes to serve. An offered bundle is checked, put into the free slot, the high-water mark raised, the
 * filter changed at a tick boundary, and only then is the pointer moved: each step durable before the next. A refused one
 * leaves everything as it was. Where a power cut came in between, the next start ends what was begun.
 *
 * Trial and probation on a live stream belong beside this, under orders/.
 */
import type { Site, TrustedKeys } from '@stillwell/protocol';
import type { Disk } from '../disk.ts';
import type { CheckedBundle } from '../serving.ts';
import { standing } from './high-water.ts';
import { checkBundle, type RefusalCode } from './load.ts';
import { type Slot, Slots } from './slots.ts';

/** What became of an offered bundle. */
export type Offered =
  | {
      readonly outcome: 'accepted';
      readonly checked: CheckedBundle;
      readonly slot: Slot;
      readonly isSameDocument: boolean;
    }
  /** It serves already, or was seen and is not wanted again: nothing to say. */
  | { readonly outcome: 'known' }
  | { readonly outcome: 'refused'; readonly code: RefusalCode | 'disk'; readonly reason: string };

/** Keeper of the two slots; see the file head. */
export class BundleKeeper {
  readonly #site: Site;
  readonly #trusted: TrustedKeys;
  readonly #slots: Slots;
  readonly #held = new Map<Slot, CheckedBundle>();
  /** Why a filled slot is not usable, in words. */
  readonly faults: readonly string[];

  /** Checks what stands in the slots. throws  RuntimeError 'data-folder' */
  constructor(disk: Disk, folder: string, site: Site, trusted: TrustedKeys) {
    this.#site = site;
    this.#trusted = trusted;
    this.#slots = new Slots(disk, folder);
    const faults: string[] = [];
    for (const slot of this.#slots.inOrder()) {
      const sealed = this.#slots.read(slot);
      if (sealed === null) continue;
      const verdict = this.#check(sealed, true);
      if (verdict.ok) this.#held.set(slot, verdict.checked);
      else faults.push(`slot ${slot}: ${verdict.reason}`);
    }
    this.faults = faults;
  }

  get highWater(): Slots['highWater'] {
    return this.#slots.highWater;
  }

  /** The usable bundle with this digest; null where neither slot has it. */
  byDigest(digest: Uint8Array): CheckedBundle | null {
    return this.#inOrder().find((checked) => isSame(checked.digest, digest)) ?? null;
  }

  /** What to serve when nothing else decides: the pointer's bundle, else the other one. */
  best(): CheckedBundle | null {
    return this.#inOrder()[0] ?? null;
  }

  /** All usable bundles, the pointer's first. */
  get usable(): readonly CheckedBundle[] {
    return this.#inOrder();
  }

  /** An accepted bundle newer than the serving one, whose change a power cut interrupted. */
  interrupted(serving: CheckedBundle): CheckedBundle | null {
    const newest = this.#slots.highWater[this.#slots.highWater.length - 1];
    return (
      this.#inOrder().find(
        (checked) =>
          !isSame(checked.digest, serving.digest) &&
          checked.epoch === newest?.epoch &&
          checked.sequence === newest.sequence &&
          (checked.epoch > serving.epoch || checked.sequence > serving.sequence),
      ) ?? null
    );
  }

  /** Moves the pointer to a held bundle, durably. */
  serves(checked: CheckedBundle): void {
    for (const [slot, held] of this.#held) if (held === checked) this.#slots.point(slot);
  }

  /** What would become of an offered bundle; stores nothing. */
  judge(sealed: Uint8Array): Exclude<Offered, { outcome: 'accepted' }> | { outcome: 'good'; checked: CheckedBundle } {
    const verdict = this.#check(sealed, false);
    if (verdict.ok) return { outcome: 'good', checked: verdict.checked };
    const { code, reason } = verdict;
    return code === 'sequence' && this.#isKnown(sealed) ? { outcome: 'known' } : { outcome: 'refused', code, reason };
  }

  /** Checks an offered bundle and, if it holds, makes it durable; the caller then changes and calls `serves`. */
  offer(sealed: Uint8Array, serving: CheckedBundle | null): Offered {
    const judged = this.judge(sealed);
    if (judged.outcome !== 'good') return judged;
    const { checked } = judged;
    const isSameDocument = serving !== null && isSame(serving.digest, checked.digest);
    try {
      const slot = isSameDocument ? this.#slots.renew(sealed) : this.#slots.store(sealed);
      this.#slots.raise(checked.epoch, checked.sequence);
      this.#held.set(slot, checked);
      return { outcome: 'accepted', checked, slot, isSameDocument };
    } catch (error) {
      return { outcome: 'refused', code: 'disk', reason: `not stored: ${(error as Error).message}` };
    }
  }

  /** Retained bundles come again on every connect: the very bundle at the mark, or one served before, is no news. */
  #isKnown(sealed: Uint8Array): boolean {
    const verdict = this.#check(sealed, true);
    if (!verdict.ok) return false;
    const { digest, epoch, sequence } = verdict.checked;
    if (standing(this.#slots.highWater, epoch, sequence) === 'above') return false;
    return [...this.#held.values()].some(
      (held) => isSame(held.digest, digest) && held.epoch === epoch && held.sequence === sequence,
    );
  }

  #check(sealed: Uint8Array, isOwn: boolean): ReturnType<typeof checkBundle> {
    const { highWater } = this.#slots;
    return checkBundle(sealed, { site: this.#site, trusted: this.#trusted, highWater, isOwn });
  }

  #inOrder(): readonly CheckedBundle[] {
    return this.#slots.inOrder().flatMap((slot) => this.#held.get(slot) ?? []);
  }
}

function isSame(a: Uint8Array, b: Uint8Array): boolean {
  return Buffer.compare(a, b) === 0;
}
