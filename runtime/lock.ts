/**
 * One process a data folder. The lock names its holder by process id and start time, so that a process that died, or one
 * that got the dead one's id, does not keep the next one out. Two containers that share a folder but not their process
 * ids are not told apart: give each gateway a folder of its own.
 */
import { closeSync, openSync, readFileSync, rmSync, writeSync } from 'node:fs';
import { join } from 'node:path';
import { RuntimeError } from './errors.ts';

interface Holder {
  readonly pid: number;
  /** Start of the process in clock ticks since boot, and the boot; empty where the system does not tell. */
  readonly started: string;
}

/** Path of the lock in a data folder. */
function lockPath(folder: string): string {
  return join(folder, 'lock');
}

/** The file system as far as a lock needs it; passed in by tests. */
export interface LockFiles {
  /** Creates a file that must not exist yet. */
  create(path: string, text: string): void;
  remove(path: string): void;
}

const nodeFiles: LockFiles = {
  create(path, text) {
    const descriptor = openSync(path, 'wx', 0o644);
    writeSync(descriptor, text);
    closeSync(descriptor);
  },
  remove: (path) => rmSync(path, { force: true }),
};

/**
 * Takes the lock and gives the function that lets it go. On a read-only file system there is none to take: nobody writes
 * there, so that two gateways could only fight for their client id.
 *
 * throws  RuntimeError 'locked' naming the process that has it
 */
export function takeLock(folder: string, files: LockFiles = nodeFiles): () => void {
  try {
    return takeWritableLock(folder, files);
  } catch (error) {
    if ((error as { code?: unknown }).code === 'EROFS') return () => {};
    throw error;
  }
}

function takeWritableLock(folder: string, files: LockFiles): () => void {
  const path = lockPath(folder);
  for (let attempt = 0; attempt < 2; attempt++) {
    try {
      files.create(path, `${JSON.stringify({ pid: process.pid, started: startOf(process.pid) })}\n`);
      return () => files.remove(path);
    } catch (error) {
      if ((error as { code?: unknown }).code !== 'EEXIST') throw error;
    }
    const holder = lockHolder(folder);
    if (holder !== null)
      throw new RuntimeError(
        'locked',
        `data folder ${folder}: process ${holder} uses it already; stop that gateway, or give this one a folder of its own`,
        { details: { pid: holder } },
      );
    files.remove(path);
  }
  throw new RuntimeError('locked', `data folder ${folder}: another process takes the lock at this moment; try again`);
}

/** Process id of the gateway that runs on a data folder; null when none does. */
export function lockHolder(folder: string): number | null {
  let holder: Holder;
  try {
    holder = JSON.parse(readFileSync(lockPath(folder), 'utf8')) as Holder;
    process.kill(holder.pid, 0);
  } catch (error) {
    // EPERM: it lives, under another account.
    if ((error as { code?: unknown }).code !== 'EPERM') return null;
    holder = JSON.parse(readFileSync(lockPath(folder), 'utf8')) as Holder;
  }
  return holder.started === '' || holder.started === startOf(holder.pid) ? holder.pid : null;
}

/** Boot id and field 22 of /proc/PID/stat, proc(5). */
function startOf(pid: number): string {
  try {
    const stat = readFileSync(`/proc/${pid}/stat`, 'utf8');
    const fields = stat.slice(stat.lastIndexOf(')') + 2).split(' ');
    return `${readFileSync('/proc/sys/kernel/random/boot_id', 'utf8').trim()}:${fields[19]}`;
  } catch {
    return '';
  }
}
