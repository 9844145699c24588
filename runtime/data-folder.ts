/** A data folder that a gateway is to run on, which may have become read-only: a worn card is remounted so by the system. */
import { join } from 'node:path';
import { makeDataFolder } from './config.ts';
import type { Disk } from './disk.ts';

/**
 * Makes the data folder, or finds that one from before can only be read, which is enough to forecast from.
 *
 * returns  what to say of it; null where all is well
 * throws   RuntimeError 'data-folder'
 */
export function openDataFolder(disk: Disk, folder: string): string | null {
  try {
    makeDataFolder(disk, folder);
    return null;
  } catch (error) {
    const { code } = ((error as Error).cause ?? {}) as { code?: unknown };
    if (code !== 'EROFS' || disk.size(join(folder, 'identity.json')) === 0) throw error;
    return `data folder ${folder}: the file system is read-only; forecasts go on from what it holds, nothing is recorded`;
  }
}
