/** Files in a folder of their own and sites to read them with, for the tests of histories. */
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { AS_SENT, type Input, type Signal, type Site } from '../../../protocol/index.ts';

export function signal(name: string, more: Partial<Signal> = {}): Signal {
  return {
    name,
    topic: `plant/test/${name}`,
    payload: { kind: 'number' },
    unit: '1',
    ...AS_SENT,
    resolution: null,
    range: null,
    aggregate: 'last',
    limits: { highHigh: null, high: null, low: null, lowLow: null },
    warn: null,
    column: name,
    ...more,
  };
}

export function site(signals: readonly (string | Signal)[], more: Partial<Site> = {}): Site {
  return {
    site: 'test',
    equipmentClass: 'general',
    timeZone: 'UTC',
    tickMs: 60_000,
    horizon: 24,
    latenessMs: 1000,
    root: 'stillwell',
    residualBytesPerDay: 100_000,
    warn: { open: 0.5, close: 0.3, hold: 2 },
    signals: signals.map((one) => (typeof one === 'string' ? signal(one) : one)),
    inputs: [] as Input[],
    calendar: { timeOfDay: true, dayOfWeek: true, holidays: [] },
    exclude: [],
    ...more,
  };
}

/** A folder for one test file; `write` gives the path of a new file in it. */
export class Folder {
  readonly path = mkdtempSync(join(tmpdir(), 'stillwell-history-'));

  write(name: string, content: string | Uint8Array): string {
    const path = join(this.path, name);
    writeFileSync(path, content);
    return path;
  }

  remove(): void {
    rmSync(this.path, { recursive: true, force: true });
  }
}
