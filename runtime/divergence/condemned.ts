/**
 * Bundles that failed on this gateway's own readings: not put to work again by a start, only by a person who sends them anew.
 * Kept in the data folder, so that what ends in a failure is not begun again at every start.
 *
 * astray.json   JSON {"digest in hexadecimal": "why", …}, the last eight
 */
import { join } from 'node:path';
import { toHex } from '@stillwell/protocol';
import { type Disk, replaceOn } from '../disk.ts';

const MOST = 8;

/** See the file head. */
export class Condemned {
  readonly #disk: Disk;
  readonly #path: string;
  readonly #reasons: Map<string, string>;

  /** An unreadable file condemns nothing: what it named fails again, and is named again. */
  constructor(disk: Disk, folder: string) {
    this.#disk = disk;
    this.#path = join(folder, 'astray.json');
    this.#reasons = new Map(this.#read());
  }

  has(digest: Uint8Array): boolean {
    return this.#reasons.has(toHex(digest));
  }

  add(digest: Uint8Array, why: string): void {
    if (this.has(digest)) return;
    this.#reasons.set(toHex(digest), why);
    for (const oldest of this.#reasons.keys()) if (this.#reasons.size > MOST) this.#reasons.delete(oldest);
    this.#write();
  }

  pardon(digest: Uint8Array): void {
    if (this.#reasons.delete(toHex(digest))) this.#write();
  }

  #read(): [string, string][] {
    try {
      const bytes = this.#disk.read(this.#path);
      if (bytes === null) return [];
      const entries = Object.entries(JSON.parse(Buffer.from(bytes).toString('utf8')) as Record<string, unknown>);
      return entries.slice(-MOST).map(([digest, why]) => [digest, String(why)]);
    } catch {
      return [];
    }
  }

  /** A disk that takes nothing is said in health already; in memory the bundle stays condemned. */
  #write(): void {
    try {
      replaceOn(this.#disk, this.#path, Buffer.from(`${JSON.stringify(Object.fromEntries(this.#reasons))}\n`, 'utf8'));
    } catch {}
  }
}
