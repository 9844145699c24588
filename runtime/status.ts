/** The gateway's last health message in its data folder, for those at the machine without a broker at hand. */
import { join } from 'node:path';
import { type HealthMessage, parseHealthMessage } from '@stillwell/protocol';
import type { Disk } from './disk.ts';
import { RuntimeError } from './errors.ts';

function statusPath(folder: string): string {
  return join(folder, 'status.json');
}

/** Replaces the status file, not synced: it is worth nothing after a power cut, and flash wears. Never throws. */
export function writeStatus(disk: Disk, folder: string, health: Uint8Array): void {
  const beside = join(folder, '.status.json.part');
  try {
    disk.write(beside, health);
    disk.rename(beside, statusPath(folder));
  } catch {
    // A full or read-only disk is said in health already.
  }
}

/** throws  RuntimeError 'file' when there is none or it is damaged */
export function readStatus(disk: Disk, folder: string): HealthMessage {
  const bytes = disk.read(statusPath(folder));
  if (bytes === null)
    throw new RuntimeError('file', `data folder ${folder}: no status file; has a gateway ever run here?`);
  try {
    return parseHealthMessage(bytes);
  } catch (cause) {
    throw new RuntimeError(
      'file',
      `${statusPath(folder)}: ${(cause as Error).message}; the gateway writes it anew when it runs next`,
      { cause },
    );
  }
}
