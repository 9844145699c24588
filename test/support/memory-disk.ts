/**
 * A disk in memory that can fail or lose power at any single operation, and then shows what a real one might hold: what
 * was synced for certain, and of the rest any part, files and folder entries apart.
 */
import { dirname } from 'node:path';
import type { AppendFile, Disk } from '../../runtime/disk.ts';

interface Inode {
  data: Buffer;
  synced: Buffer;
}

/** What survives of the unsynced: nothing, everything, or a part drawn by `random`. */
export type Survival = 'nothing' | 'everything' | (() => number);

/** Thrown by every operation from the cut on. */
export class PowerCut extends Error {}

export class MemoryDisk implements Disk {
  readonly #entries = new Map<string, Inode>();
  readonly #durable = new Map<string, Inode>();
  /** Changing operations so far. */
  operations = 0;
  /** The operation with this number, and all after it, do not happen. */
  cutAt = Number.POSITIVE_INFINITY;
  /** From this operation on the disk fails with this code, until `repair`. */
  faultAt = Number.POSITIVE_INFINITY;
  fault = 'EIO';

  repair(): void {
    this.faultAt = Number.POSITIVE_INFINITY;
  }

  /** The disk as the next start finds it. */
  afterPowerCut(survival: Survival): MemoryDisk {
    const next = new MemoryDisk();
    const copies = new Map<Inode, Inode>();
    const copy = (inode: Inode): Inode => {
      let known = copies.get(inode);
      if (known === undefined) {
        const data = surviving(inode, survival);
        known = { data, synced: data };
        copies.set(inode, known);
      }
      return known;
    };
    for (const path of new Set([...this.#durable.keys(), ...this.#entries.keys()])) {
      const isNew = survival === 'everything' || (survival !== 'nothing' && survival() < 0.5);
      const inode = (isNew ? this.#entries : this.#durable).get(path);
      if (inode === undefined) continue;
      next.#entries.set(path, copy(inode));
      next.#durable.set(path, copy(inode));
    }
    return next;
  }

  makeFolder(): void {}

  read(path: string): Uint8Array | null {
    const inode = this.#entries.get(path);
    return inode === undefined ? null : Uint8Array.from(inode.data);
  }

  size(path: string): number {
    return this.#entries.get(path)?.data.length ?? 0;
  }

  list(folder: string): readonly string[] {
    return [...this.#entries.keys()]
      .filter((path) => dirname(path) === folder)
      .map((path) => path.slice(folder.length + 1))
      .sort();
  }

  write(path: string, bytes: Uint8Array): void {
    this.#operate();
    const inode = this.#entries.get(path) ?? { data: Buffer.alloc(0), synced: Buffer.alloc(0) };
    inode.data = Buffer.from(bytes);
    this.#entries.set(path, inode);
  }

  sync(path: string): void {
    this.#operate();
    const inode = this.#entries.get(path)!;
    inode.synced = inode.data;
  }

  rename(from: string, to: string): void {
    this.#operate();
    this.#entries.set(to, this.#entries.get(from)!);
    this.#entries.delete(from);
  }

  syncFolder(folder: string): void {
    this.#operate();
    for (const path of [...this.#durable.keys()])
      if (dirname(path) === folder && !this.#entries.has(path)) this.#durable.delete(path);
    for (const [path, inode] of this.#entries) if (dirname(path) === folder) this.#durable.set(path, inode);
  }

  remove(path: string): void {
    if (!this.#entries.has(path)) return;
    this.#operate();
    this.#entries.delete(path);
  }

  openAppend(path: string, keepBytes: number): AppendFile {
    this.#operate();
    const inode = this.#entries.get(path) ?? { data: Buffer.alloc(0), synced: Buffer.alloc(0) };
    inode.data = Buffer.from(inode.data.subarray(0, keepBytes));
    this.#entries.set(path, inode);
    const sync = (): void => {
      this.#operate();
      inode.synced = inode.data;
    };
    return {
      append: (bytes) => {
        this.#operate();
        inode.data = Buffer.concat([inode.data, bytes]);
      },
      sync,
      syncSoon: async () => sync(),
      close: () => {},
    };
  }

  #operate(): void {
    if (this.operations >= this.cutAt) throw new PowerCut('the power is off');
    this.operations++;
    if (this.operations > this.faultAt) throw Object.assign(new Error(`${this.fault}: no`), { code: this.fault });
  }
}

/** Unsynced bytes survive as a prefix of any length, the last of them perhaps as zeros. */
function surviving(inode: Inode, survival: Survival): Buffer {
  if (survival === 'everything') return inode.data;
  if (survival === 'nothing') return inode.synced;
  const grown = inode.data.subarray(0, inode.synced.length).equals(inode.synced);
  if (!grown) return survival() < 0.5 ? inode.synced : inode.data;
  const extra = Math.floor(survival() * (inode.data.length - inode.synced.length + 1));
  const kept = Buffer.from(inode.data.subarray(0, inode.synced.length + extra));
  if (survival() < 0.3) kept.fill(0, inode.synced.length + Math.floor(extra / 2));
  return kept;
}
