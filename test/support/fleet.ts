/** A fleet of small invented sites on disk: a folder a site, with its site file and its log. */
import { mkdirSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { wanderingDays } from './history.ts';

const FIRST_MS = Date.UTC(2024, 0, 1);
export const NAMES = ['level', 'flow'] as const;

/** Site file of a site of that name. */
export function fleetSite(name: string): string {
  return `site: ${name}\ntime_zone: UTC\ntick: 1h\nhorizon: 6\nsignals:\n${NAMES.map((one) => `  - {name: ${one}}\n`).join('')}`;
}

/** A log from a seed. */
export function fleetLog(seed: number, ticks = 260): string {
  const values = wanderingDays(NAMES.length, ticks, seed);
  const rows = Array.from({ length: ticks }, (_, n) =>
    [new Date(FIRST_MS + 3.6e6 * n).toISOString(), ...values.map((one) => one[n]!.toFixed(2))].join(','),
  );
  return `time,${NAMES.join(',')}\n${rows.join('\n')}\n`;
}

/** Writes one folder a name, with site.yaml and log.csv. */
export function writeFleet(folder: string, names: readonly string[]): void {
  for (const [k, name] of names.entries()) {
    mkdirSync(join(folder, name), { recursive: true });
    writeFileSync(join(folder, name, 'site.yaml'), fleetSite(name));
    writeFileSync(join(folder, name, 'log.csv'), fleetLog(k + 1, 180));
  }
}
