/** Where a data folder keeps its checkpoint and journal. */
import { join } from 'node:path';

/** Path of the checkpoint in a data folder. */
export function checkpointPath(folder: string): string {
  return join(folder, 'checkpoint');
}

/** Folder of the journal files in a data folder. */
export function journalFolder(folder: string): string {
  return join(folder, 'journal');
}

/** Path of the journal file of a segment. */
export function journalPath(folder: string, number: number): string {
  return join(journalFolder(folder), `${String(number).padStart(10, '0')}.swj`);
}
