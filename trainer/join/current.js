/**
 * Whether the joined program is what build.js would make of the compiled files as they are now. The list beside it says what
 * it depends on, one row a file: path from the joined folder, bytes, time of change, SHA-256. The files are the compiler's own
 * records, which change with every source, and the manifests of the libraries: sixty instead of a thousand, since this runs at
 * every start. A file of the bytes and the time it had is the same; only where the time differs (a copied tree, a compilation
 * that changed nothing) is it read.
 *
 * The list stays out of the package (`files` in package.json): nothing is compiled where that is installed.
 */
import { createHash } from 'node:crypto';
import { readFileSync, statSync } from 'node:fs';
import { join } from 'node:path';

/** Name of the list in the joined folder. */
export const LIST = 'inputs.json';

/** The row of one input; `path` is from the joined folder. */
export function rowOf(joined, path) {
  const file = join(joined, path);
  const { size, mtimeMs } = statSync(file);
  return [path, size, mtimeMs, digestOf(file)];
}

/** False where there is none, or where an input changed or is gone. */
export function isCurrent(joined) {
  if (!isThere(join(joined, 'cli.js'))) return false;
  if (!isThere(join(joined, LIST))) return true;
  const rows = JSON.parse(readFileSync(join(joined, LIST), 'utf8'));
  return rows.every(([path, size, mtimeMs, digest]) => {
    const file = join(joined, path);
    const found = statSync(file, { throwIfNoEntry: false });
    return found?.size === size && (found.mtimeMs === mtimeMs || digestOf(file) === digest);
  });
}

function isThere(file) {
  return statSync(file, { throwIfNoEntry: false }) !== undefined;
}

function digestOf(file) {
  return createHash('sha256').update(readFileSync(file)).digest('hex');
}
