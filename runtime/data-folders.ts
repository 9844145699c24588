/** Which folder below `--data` is whose: a site alone has all of it, several have one each, named after them. */
import { join } from 'node:path';
import type { Disk } from './disk.ts';
import { RuntimeError } from './errors.ts';

/**
 * Data folder of a site. Once it has one of its own it keeps it, also when it is run alone later.
 *
 * count   sites that are run together
 * throws  RuntimeError 'data-folder' where several are asked for in the folder of a single one
 */
export function dataFolderOf(disk: Disk, data: string, site: string, count: number): string {
  const own = join(data, site);
  const isOfOne = isUsed(disk, data);
  if (count === 1) return !isOfOne && isUsed(disk, own) ? own : data;
  if (!isOfOne) return own;
  throw new RuntimeError(
    'data-folder',
    `data folder ${data}: expected one for several sites, got that of a single gateway; move what is in it into a folder ` +
      `named after its site below (${own} if it is ${site}'s), or give another with --data`,
  );
}

/** Folders of the gateways that ever ran under `data`: itself, or those below it. */
export function usedFolders(disk: Disk, data: string): readonly string[] {
  if (isUsed(disk, data)) return [data];
  return disk
    .list(data)
    .map((name) => join(data, name))
    .filter((folder) => isUsed(disk, folder));
}

/** A gateway ran there, or a bundle was loaded for one. */
function isUsed(disk: Disk, folder: string): boolean {
  return disk.size(join(folder, 'identity.json')) > 0 || disk.list(join(folder, 'slots')).length > 0;
}
