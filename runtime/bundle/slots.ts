/**
 * Two places for sealed bundles, and which one serves. A new bundle goes into the other slot, then the high-water mark
 * rises, then the pointer is replaced: whatever instruction the power fails at, the serving slot still holds a whole
 * bundle. The bundle served before stays in the other slot to fall back to.
 *
 * slots/a.swb, slots/b.swb   sealed bundles as they came
 * slots/pointer              JSON {"serving": "a" | "b" | null}
 * slots/high-water           JSON [{"epoch", "sequence"}, …]
 */
import { join } from 'node:path';
import { type Disk, replaceOn, sweepParts } from '../disk.ts';
import { RuntimeError } from '../errors.ts';
import { type HighWater, raised } from './high-water.ts';

/** Name of a slot. */
export type Slot = 'a' | 'b';

/** Whether a data folder has a bundle in either slot, whole or not; touches nothing. */
export function holdsBundle(disk: Disk, folder: string): boolean {
  return (['a', 'b'] as const).some((slot) => disk.size(join(folder, 'slots', `${slot}.swb`)) > 0);
}

/** See the file head. */
export class Slots {
  readonly #disk: Disk;
  readonly #folder: string;
  #serving: Slot | null;
  #highWater: HighWater;

  /**
   * folder  the data folder
   * throws  RuntimeError 'data-folder' when the high-water mark is there but cannot be read: guessing would open the way
   *         for old bundles
   */
  constructor(disk: Disk, folder: string) {
    this.#disk = disk;
    this.#folder = join(folder, 'slots');
    disk.makeFolder(this.#folder);
    sweepParts(disk, this.#folder);
    this.#highWater = this.#readHighWater();
    this.#serving = this.#readPointer();
  }

  get serving(): Slot | null {
    return this.#serving;
  }

  get highWater(): HighWater {
    return this.#highWater;
  }

  /** The sealed bytes in a slot; null when it is empty. */
  read(slot: Slot): Uint8Array | null {
    return this.#disk.read(this.#path(`${slot}.swb`));
  }

  /** Both slots, the serving one first. */
  inOrder(): readonly Slot[] {
    return this.#serving === 'b' ? ['b', 'a'] : ['a', 'b'];
  }

  /** Puts a verified bundle into the slot that does not serve, durably; nothing is activated. */
  store(sealed: Uint8Array): Slot {
    const slot = this.#serving === 'a' ? 'b' : 'a';
    replaceOn(this.#disk, this.#path(`${slot}.swb`), sealed);
    return slot;
  }

  /** Replaces the serving slot's bundle by the same document sealed anew, durably. */
  renew(sealed: Uint8Array): Slot {
    const slot = this.#serving ?? 'a';
    replaceOn(this.#disk, this.#path(`${slot}.swb`), sealed);
    return slot;
  }

  /** Raises the high-water mark, durably. */
  raise(epoch: number, sequence: number): void {
    const next = raised(this.#highWater, epoch, sequence);
    if (next === this.#highWater) return;
    replaceOn(this.#disk, this.#path('high-water'), Buffer.from(`${JSON.stringify(next)}\n`, 'utf8'));
    this.#highWater = next;
  }

  /** Makes a slot the serving one, durably. */
  point(slot: Slot): void {
    if (slot === this.#serving) return;
    replaceOn(this.#disk, this.#path('pointer'), Buffer.from(`${JSON.stringify({ serving: slot })}\n`, 'utf8'));
    this.#serving = slot;
  }

  #path(name: string): string {
    return join(this.#folder, name);
  }

  #readPointer(): Slot | null {
    const bytes = this.#disk.read(this.#path('pointer'));
    if (bytes === null) return null;
    try {
      const { serving } = JSON.parse(Buffer.from(bytes).toString('utf8')) as { serving: unknown };
      return serving === 'a' || serving === 'b' ? serving : null;
    } catch {
      // Unreadable: both slots are then tried, each by every check.
      return null;
    }
  }

  #readHighWater(): HighWater {
    const path = this.#path('high-water');
    const bytes = this.#disk.read(path);
    if (bytes === null) return [];
    try {
      const marks = JSON.parse(Buffer.from(bytes).toString('utf8')) as { epoch: unknown; sequence: unknown }[];
      const isGood = (mark: { epoch: unknown; sequence: unknown }): boolean =>
        Number.isSafeInteger(mark.epoch) && Number.isSafeInteger(mark.sequence);
      if (Array.isArray(marks) && marks.every(isGood)) return marks as unknown as HighWater;
    } catch {
      // Falls through to the one message for every kind of damage.
    }
    throw new RuntimeError(
      'data-folder',
      `${path}: expected the highest bundle sequences seen as JSON, got something else; ` +
        'restore it from a copy, or move the data folder aside to start afresh',
    );
  }
}
