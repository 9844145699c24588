/**
 * One desk a data folder: two would split the chain of segments between them. A lock file names the process that holds
 * the folder; one left behind by a process that is gone is taken over.
 */
import { closeSync, openSync, readFileSync, rmSync, writeSync } from 'node:fs';
import { join } from 'node:path';
import { TrainError } from '../../errors.ts';

/**
 * Takes the folder and returns what gives it back.
 *
 * throws  TrainError 'archive' while a living process holds it
 */
export function lockFolder(folder: string): () => void {
  const path = join(folder, 'desk.lock');
  for (let attempt = 0; attempt < 2; attempt++) {
    try {
      const descriptor = openSync(path, 'wx');
      writeSync(descriptor, String(process.pid));
      closeSync(descriptor);
      return () => rmSync(path, { force: true });
    } catch (cause) {
      if ((cause as NodeJS.ErrnoException).code !== 'EEXIST') {
        throw new TrainError(
          'archive',
          `cannot write to the desk's data folder ${folder}: ${(cause as Error).message}`,
          {
            cause,
          },
        );
      }
    }
    const holder = Number.parseInt(readFileSync(path, 'utf8'), 10);
    if (isAlive(holder)) {
      throw new TrainError(
        'archive',
        `${folder} is in use by another desk (process ${holder}); stop that one first, or give another --data ` +
          `folder; if process ${holder} is no desk, remove ${path}`,
      );
    }
    rmSync(path, { force: true });
  }
  throw new TrainError('archive', `${path} keeps coming back; see which process writes it`);
}

/** An own pid found in the file is left over from before a restart of the machine or container. */
function isAlive(pid: number): boolean {
  if (!Number.isInteger(pid) || pid <= 0 || pid === process.pid) return false;
  try {
    process.kill(pid, 0);
    return true;
  } catch (error) {
    return (error as NodeJS.ErrnoException).code === 'EPERM';
  }
}
