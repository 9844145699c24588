/**
 * The disk as a port, in the few operations whose order decides what a power cut leaves behind. Everything durable of the
 * gateway goes through it, so that tests can fail or cut any single operation.
 */
import {
  closeSync,
  fsync,
  fsyncSync,
  ftruncateSync,
  openSync,
  readdirSync,
  readFileSync,
  renameSync,
  rmSync,
  statSync,
} from 'node:fs';
import { basename, dirname, join } from 'node:path';
import { makeFolder, syncFolder, writeFully } from './files.ts';

/** A file that only grows. */
export interface AppendFile {
  /** Writes all bytes at the end; nothing is durable yet. */
  append(bytes: Uint8Array): void;
  /** Makes what was appended durable. After an error the file must not be trusted again: the system may have dropped pages. */
  sync(): void;
  /** As sync, off the main thread. */
  syncSoon(): Promise<void>;
  close(): void;
}

/** The disk, in single operations. */
export interface Disk {
  makeFolder(path: string): void;
  /** Null where there is no such file. */
  read(path: string): Uint8Array | null;
  /** Bytes of a file, 0 where there is none. */
  size(path: string): number;
  /** Names in a folder, sorted; none where there is no such folder. */
  list(folder: string): readonly string[];
  /** Creates or overwrites; not durable before sync. */
  write(path: string, bytes: Uint8Array): void;
  sync(path: string): void;
  rename(from: string, to: string): void;
  syncFolder(folder: string): void;
  /** Nothing happens where there is no such file. */
  remove(path: string): void;
  /** Opens for appending, cut to its first `keepBytes`; creates it. */
  openAppend(path: string, keepBytes: number): AppendFile;
}

/**
 * Replaces or creates `path` on any disk so that a power cut leaves the old bytes or the new.
 *
 * throws  the disk's error, the old file untouched
 */
export function replaceOn(disk: Disk, path: string, bytes: Uint8Array): void {
  const beside = join(dirname(path), `.${basename(path)}.part`);
  try {
    disk.write(beside, bytes);
    disk.sync(beside);
    disk.rename(beside, path);
  } catch (cause) {
    try {
      disk.remove(beside);
    } catch {
      // The first error is the one that tells what is wrong with the disk.
    }
    throw cause;
  }
  disk.syncFolder(dirname(path));
}

/** Removes what interrupted replacements left in a folder. */
export function sweepParts(disk: Disk, folder: string): void {
  for (const name of disk.list(folder)) if (name.endsWith('.part')) disk.remove(join(folder, name));
}

/** Whether an error is the system's word that there is no such file. */
function isMissing(error: unknown): boolean {
  const code = (error as { code?: unknown }).code;
  return code === 'ENOENT' || code === 'ENOTDIR';
}

class NodeAppendFile implements AppendFile {
  readonly #descriptor: number;

  constructor(path: string, keepBytes: number) {
    this.#descriptor = openSync(path, 'a');
    try {
      ftruncateSync(this.#descriptor, keepBytes);
    } catch (cause) {
      // A failing disk is tried every half minute; each try would keep a descriptor.
      closeSync(this.#descriptor);
      throw cause;
    }
  }

  append(bytes: Uint8Array): void {
    writeFully(this.#descriptor, bytes);
  }

  sync(): void {
    fsyncSync(this.#descriptor);
  }

  syncSoon(): Promise<void> {
    return new Promise((resolve, reject) => fsync(this.#descriptor, (error) => (error ? reject(error) : resolve())));
  }

  close(): void {
    closeSync(this.#descriptor);
  }
}

/** The machine's own disk. */
export const nodeDisk: Disk = {
  makeFolder,
  read(path) {
    try {
      // A plain array: a Buffer's slice would be a view where everyone expects a copy.
      return new Uint8Array(readFileSync(path));
    } catch (error) {
      if (isMissing(error)) return null;
      throw error;
    }
  },
  size(path) {
    try {
      return statSync(path, { throwIfNoEntry: false })?.size ?? 0;
    } catch (error) {
      // A file where a folder on the way should be is thrown all the same.
      if (isMissing(error)) return 0;
      throw error;
    }
  },
  list(folder) {
    try {
      return readdirSync(folder).sort();
    } catch (error) {
      if (isMissing(error)) return [];
      throw error;
    }
  },
  write(path, bytes) {
    const descriptor = openSync(path, 'w', 0o644);
    try {
      writeFully(descriptor, bytes);
    } finally {
      closeSync(descriptor);
    }
  },
  sync(path) {
    const descriptor = openSync(path, 'r+');
    try {
      fsyncSync(descriptor);
    } finally {
      closeSync(descriptor);
    }
  },
  rename: (from, to) => renameSync(from, to),
  syncFolder,
  remove: (path) => rmSync(path, { force: true }),
  openAppend: (path, keepBytes) => new NodeAppendFile(path, keepBytes),
};
