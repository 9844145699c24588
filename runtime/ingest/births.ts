/**
 * Births of Sparkplug nodes on disk, so that a restart need not wait for the next ones, which this gateway never asks for.
 * Written when one has come, twice a minute at most. They are believed after a short absence only, see RESTART_MS: in a
 * longer one a death may have passed unheard, which the broker keeps for us no longer than our session.
 */
import { join } from 'node:path';
import { parseSavedNodes, type SparkplugSessions } from '@stillwell/protocol';
import { type Disk, replaceOn } from '../disk.ts';

/** Longest absence after which births still hold: as long as the broker keeps our session. */
const RESTART_MS = 3600 * 1000;

/** See the file head. */
export class BirthFile {
  readonly #disk: Disk;
  readonly #path: string;
  readonly #sessions: SparkplugSessions;
  #saved: number;

  /**
   * Takes the births of the file up.
   *
   * heardMs  time of the newest reading before the restart; -Infinity where there was none
   */
  constructor(disk: Disk, folder: string, sessions: SparkplugSessions, heardMs: number) {
    this.#disk = disk;
    this.#path = join(folder, 'births.json');
    this.#sessions = sessions;
    const bytes = disk.read(this.#path);
    const nodes = bytes === null ? null : parseSavedNodes(Buffer.from(bytes).toString('utf8'));
    if (nodes !== null) sessions.restore(nodes, heardMs + RESTART_MS);
    this.#saved = sessions.changes;
  }

  /** Writes what has changed. A disk that takes nothing is told of elsewhere; it is tried again at the next change. */
  save(): void {
    if (this.#sessions.changes === this.#saved) return;
    this.#saved = this.#sessions.changes;
    try {
      replaceOn(this.#disk, this.#path, Buffer.from(`${JSON.stringify(this.#sessions.save())}\n`, 'utf8'));
    } catch {
      this.#saved = -1;
    }
  }
}
