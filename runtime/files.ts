/**
 * Files that survive power loss: write beside, sync, rename, sync the folder. Never overwrites in place, since a full
 * disk would leave neither the old bytes nor the new.
 */
import { closeSync, fsyncSync, mkdirSync, openSync, renameSync, rmSync, statSync, writeSync } from 'node:fs';
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
 * Makes a folder and those above it. By hand, since the system's recursive way never ends where a parent exists but takes
 * no folders (/proc).
 *
 * throws  the system's error (ENOTDIR or EEXIST where a file stands in the way, EACCES, ENOENT …)
 */
export function makeFolder(path: string): void {
  if (statSync(path, { throwIfNoEntry: false })?.isDirectory()) return;
  const above = dirname(path);
  if (above !== path) makeFolder(above);
  try {
    mkdirSync(path);
  } catch (cause) {
    // Another process may have made it in between.
    if (!statSync(path, { throwIfNoEntry: false })?.isDirectory()) throw cause;
  }
}

/** A file to be written: where, what, and who may read it. */
export interface NewFile {
  readonly path: string;
  readonly bytes: Uint8Array | string;
  /** As chmod's; 0o644 unless said. */
  readonly mode?: number;
}

/**
 * Replaces or creates files so that a reader, and a machine after power loss, sees the old bytes or the new of each. All
 * of them are written beside their places before the first is put there, so that a full disk or a folder in the way
 * leaves none; a power cut between two renames may still part them.
 *
 * throws  the system's error (ENOSPC, EROFS, EACCES …), also where something that is no plain file stands at one of the
 *         places; the old files are untouched then and no rest is left behind
 */
export function replaceFiles(files: readonly NewFile[]): void {
  const written: { readonly path: string; readonly beside: string }[] = [];
  try {
    for (const { path, bytes, mode = 0o644 } of files) {
      refuseOther(path);
      makeFolder(dirname(path));
      const beside = join(dirname(path), `.${basename(path)}.${process.pid}.part`);
      written.push({ path, beside });
      writeSynced(beside, bytes, mode);
    }
    for (const { path, beside } of written) renameSync(beside, path);
  } catch (cause) {
    for (const { beside } of written) rmSync(beside, { force: true });
    throw cause;
  }
  for (const folder of new Set(files.map(({ path }) => dirname(path)))) syncFolder(folder);
}

/** Renaming onto a device would take the device away; onto a folder it fails only once the other files are in place. */
function refuseOther(path: string): void {
  const there = statSync(path, { throwIfNoEntry: false });
  if (there === undefined || there.isFile()) return;
  const what = there.isDirectory() ? 'a folder' : 'a device';
  throw Object.assign(new Error(`${what} stands there`), { code: there.isDirectory() ? 'EISDIR' : 'EINVAL', path });
}

function writeSynced(path: string, bytes: Uint8Array | string, mode: number): void {
  // A rest of an earlier run would keep its own mode, and a link would lead elsewhere: the file is always a new one.
  rmSync(path, { force: true });
  const descriptor = openSync(path, 'wx', mode);
  try {
    writeFully(descriptor, typeof bytes === 'string' ? Buffer.from(bytes, 'utf8') : bytes);
    fsyncSync(descriptor);
  } finally {
    closeSync(descriptor);
  }
}
