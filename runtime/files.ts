/**
 * Files that survive power loss: write beside, sync, rename, sync the folder. Never overwrites in place, since a full
 * disk would leave neither the old bytes nor the new.
 */
import { closeSync, fsyncSync, mkdirSync, openSync, renameSync, rmSync, writeSync } from 'node:fs';
import { basename, dirname, join } from 'node:path';

/** Writes all bytes to an open file; `writeSync` may write less than asked without an error. */
export function writeFully(descriptor: number, bytes: Uint8Array): void {
  let done = 0;
  while (done < bytes.length) done += writeSync(descriptor, bytes, done, bytes.length - done);
}

/** Makes the folder's own entries durable (creations, renames, removals). */
export function syncFolder(folder: string): void {
  const descriptor = openSync(folder, 'r');
  try {
    fsyncSync(descriptor);
  } finally {
    closeSync(descriptor);
  }
}

/**
 * Replaces or creates `path` so that a reader, and a machine after power loss, sees the old bytes or the new.
 *
 * throws  the system's error (ENOSPC, EROFS, EACCES …) with the old file untouched and no rest left behind
 */
export function replaceFile(path: string, bytes: Uint8Array | string, mode = 0o644): void {
  const folder = dirname(path);
  mkdirSync(folder, { recursive: true });
  const beside = join(folder, `.${basename(path)}.${process.pid}.part`);
  try {
    const descriptor = openSync(beside, 'w', mode);
    try {
      writeFully(descriptor, typeof bytes === 'string' ? Buffer.from(bytes, 'utf8') : bytes);
      fsyncSync(descriptor);
    } finally {
      closeSync(descriptor);
    }
    renameSync(beside, path);
  } catch (cause) {
    rmSync(beside, { force: true });
    throw cause;
  }
  syncFolder(folder);
}
