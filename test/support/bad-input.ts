/** A small site with forty days of hourly readings, and the folders that cases of bad input are tried in. */
import { mkdirSync, mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { dirname, join } from 'node:path';
import { type Case, expectRefusal, type Ran, Starter } from './cli.ts';
import { wanderingDays } from './history.ts';

const HOURS = 960;
const FIRST_MS = Date.UTC(2024, 0, 1);

/** Site file of the history below; a gateway can run it too. */
export const SITE_FILE = `site: mill-lane
class: wet-well
time_zone: Europe/London
tick: 1h
horizon: 24
signals:
${['level', 'flow', 'temp']
  .map(
    (name) => `  - name: ${name}\n    topic: plant/${name}\n    payload: number\n    unit: "1"\n    resolution: 0.01\n`,
  )
  .join('')}`;

const values = wanderingDays(3, HOURS, 7);

/** Header of the history. */
export const HEADER = 'time,level,flow,temp';

/** Rows of the history as CSV, times in UTC. */
export const ROWS: readonly string[] = Array.from({ length: HOURS }, (_, n) => {
  const time = new Date(FIRST_MS + 3_600_000 * n).toISOString();
  return [time, ...values.map((one) => one[n]!.toFixed(2))].join(',');
});

/** A CSV file of rows under a header. */
export function csv(rows: readonly string[], header = HEADER): string {
  return `${header}\n${rows.join('\n')}\n`;
}

/** The rows with one column changed. */
export function withColumn(column: number, change: (text: string, row: number) => string): string[] {
  return ROWS.map((row, n) =>
    row
      .split(',')
      .map((text, c) => (c === column ? change(text, n) : text))
      .join(','),
  );
}

/** First bytes of a PNG picture, and noise: another file altogether. */
export const PICTURE: Uint8Array = Uint8Array.from([
  ...[0x89, 0x50, 0x4e, 0x47, 0x0d, 0x0a, 0x1a, 0x0a],
  ...Array.from({ length: 4000 }, (_, n) => (n * 7919 + (n >> 3)) & 255),
]);

/** Folders to try cases in, and the process that tries them; `remove` ends both. */
export class Folders {
  readonly #starter = new Starter();
  readonly #root = mkdtempSync(join(tmpdir(), 'stillwell-bad-'));
  #count = 0;

  make(files: NonNullable<Case['files']>): string {
    const folder = join(this.#root, String(this.#count++));
    mkdirSync(folder);
    for (const [name, content] of Object.entries(files)) {
      const path = join(folder, name);
      mkdirSync(content === null ? path : dirname(path), { recursive: true });
      if (content !== null) writeFileSync(path, content);
    }
    return folder;
  }

  /** Tries one case in a folder of its own that also holds `always`. */
  async refuse({ line, files = {}, says }: Case, always: NonNullable<Case['files']> = {}): Promise<void> {
    await expectRefusal(line, this.make({ ...always, ...files }), says, (one, folder) => this.run(one, folder));
  }

  /** Runs one command line in the one process. */
  run(line: string, folder: string): Promise<Ran> {
    return this.#starter.run(line, folder);
  }

  remove(): void {
    this.#starter.stop();
    rmSync(this.#root, { recursive: true, force: true });
  }
}
