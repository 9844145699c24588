/** Files that commands write: whole or not at all, and a refusal in one line where that fails. */
import { existsSync, readdirSync, rmdirSync, unlinkSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { makeFolder, type NewFile, replaceFiles } from '@stillwell/runtime/files';
import { TrainError } from './errors.ts';

/** What the system's codes mean to a person. */
const WORDS: Readonly<Record<string, string>> = {
  EEXIST: 'a file stands where a folder is wanted',
  ENOTDIR: 'a file stands where a folder is wanted',
  ENOENT: 'there is no such folder and none can be made',
  EISDIR: 'a folder stands there',
  EACCES: 'no permission',
  EPERM: 'no permission',
  EROFS: 'the disk is read-only',
  ENOSPC: 'the disk is full',
};

/**
 * Writes or replaces a file.
 *
 * throws  TrainError 'file' with the system's reason; the old file stands then
 */
export function writeOutput(path: string, bytes: Uint8Array | string): void {
  writeOutputs([{ path, bytes }]);
}

/**
 * Writes or replaces files that belong together, all of them or none.
 *
 * throws  TrainError 'file' with the system's reason; the old files stand then
 */
export function writeOutputs(files: readonly NewFile[]): void {
  const names = files.map(({ path }) => path).join(', ');
  if (files.some(({ path }) => path === '')) throw new TrainError('file', '--out: expected a path, got an empty one');
  try {
    replaceFiles(files);
  } catch (cause) {
    throw unwritable(names, cause as Error);
  }
}

/**
 * Makes sure that files can be written to a folder before long work begins whose result would stand there; a folder made for
 * it goes away again where nothing came of the work.
 *
 * throws  TrainError 'file' with the system's reason; whatever the work throws
 */
export async function withRoom<T>(folder: string, work: () => Promise<T>): Promise<T> {
  if (folder === '') throw new TrainError('file', '--out: expected a path, got an empty one');
  const isNew = !existsSync(folder);
  const probe = join(folder, `room-${process.pid}.part`);
  try {
    makeFolder(folder);
    writeFileSync(probe, '');
    unlinkSync(probe);
  } catch (cause) {
    throw unwritable(folder, cause as Error);
  }
  try {
    return await work();
  } catch (error) {
    if (isNew && readdirSync(folder).length === 0) rmdirSync(folder);
    throw error;
  }
}

/** The refusal of a place that cannot be written, from the system's error. */
export function unwritable(names: string, cause: Error): TrainError {
  const { path = names } = cause as NodeJS.ErrnoException;
  const where = path.endsWith('.part') ? names : path;
  const words = WORDS[(cause as NodeJS.ErrnoException).code ?? ''] ?? cause.message;
  return new TrainError('file', `cannot write ${where}: ${words}; give another place, or clear this one`, { cause });
}
