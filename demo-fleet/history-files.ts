/**
 * Writes a site's past as an engineer finds it: three habits of logging, and flaws of the usual sort in each. The flaws
 * are in the files alone; what the sensors truly said stays in memory.
 *
 * wide-utc    one row a scan, ISO times in UTC, two files
 * long        one row a reading (time, signal, value), as loggers that speak one point at a time write it
 * wide-local  one row a scan, local times without zone, semicolons, headings of the engineer's own
 */
import { writeFileSync } from 'node:fs';
import { join } from 'node:path';
import type { DemoSite } from './plants/sites.ts';
import { openRandom, type Random } from './random.ts';

/** How a site's log is kept. */
export type LogHabit = 'wide-utc' | 'long' | 'wide-local';

/** Scans of one site: `rows[k]` is said at `timesMs[k]`, channels in order, NaN where a sensor was silent. */
export interface Scans {
  readonly timesMs: readonly number[];
  readonly rows: readonly Float64Array[];
}

/** Local clock minus UTC of the sites that log local time; their zone has no clock changes. */
const LOCAL_OFFSET_MS = 3_600_000;

/** The heading under which a channel stands in the site's files. */
export function columnOf(habit: LogHabit, channel: { readonly name: string; readonly unit: string }): string {
  return habit === 'wide-local' ? `${channel.name.toUpperCase()} [${channel.unit}]` : channel.name;
}

/** Writes the files into `folder` and gives their paths in order. */
export function writeHistory(folder: string, site: DemoSite, habit: LogHabit, scans: Scans, seed: number): string[] {
  const random = openRandom(seed, `flaws ${site.name}`);
  const blanks = blankOut(site, scans, random);
  const half = Math.floor(scans.timesMs.length / 2);
  const parts =
    habit === 'wide-utc'
      ? [[0, half] as const, [half, scans.timesMs.length] as const]
      : [[0, scans.timesMs.length] as const];
  return parts.map(([from, to], part) => {
    const path = join(folder, `${site.name}${parts.length > 1 ? `-${part + 1}` : ''}.csv`);
    const lines =
      habit === 'long' ? longLines(site, scans, blanks, from, to) : wideLines(site, habit, scans, blanks, from, to);
    disturbOrder(lines, random);
    writeFileSync(path, `${[heading(site, habit), ...lines].join('\n')}\n`);
    return path;
  });
}

/** One bit a reading: 1 where the log has none. A day with an outage of the logger, a sensor away for hours, odd holes. */
function blankOut(site: DemoSite, scans: Scans, random: Random): Uint8Array {
  const channels = site.channels.length;
  const total = scans.timesMs.length;
  const perDay = 86_400_000 / site.design.tickMs;
  const blanks = new Uint8Array(total * channels);
  const outage = Math.floor((0.2 + 0.5 * random.uniform()) * total);
  blanks.fill(1, outage * channels, Math.min(total, outage + Math.floor(perDay / 9)) * channels);
  const away = Math.floor((0.1 + 0.4 * random.uniform()) * total);
  for (let k = away; k < Math.min(total, away + Math.floor(perDay / 3)); k++) blanks[k * channels + 1] = 1;
  for (let hole = 0; hole < total * 0.002; hole++) blanks[Math.floor(random.uniform() * total * channels)] = 1;
  return blanks;
}

function heading(site: DemoSite, habit: LogHabit): string {
  if (habit === 'long') return 'time,signal,value';
  const separator = habit === 'wide-local' ? ';' : ',';
  return ['time', ...site.channels.map((channel) => columnOf(habit, channel))].join(separator);
}

function wideLines(
  site: DemoSite,
  habit: LogHabit,
  scans: Scans,
  blanks: Uint8Array,
  from: number,
  to: number,
): string[] {
  const channels = site.channels.length;
  const separator = habit === 'wide-local' ? ';' : ',';
  const lines: string[] = [];
  for (let k = from; k < to; k++) {
    let isEmpty = true;
    const cells = Array.from(scans.rows[k], (value, c) => {
      if (Number.isNaN(value) || blanks[k * channels + c] === 1) return '';
      isEmpty = false;
      return String(value);
    });
    if (!isEmpty) lines.push([timeText(habit, scans.timesMs[k]), ...cells].join(separator));
  }
  return lines;
}

function longLines(site: DemoSite, scans: Scans, blanks: Uint8Array, from: number, to: number): string[] {
  const channels = site.channels.length;
  const lines: string[] = [];
  for (let k = from; k < to; k++)
    for (let c = 0; c < channels; c++) {
      const value = scans.rows[k][c];
      if (Number.isNaN(value) || blanks[k * channels + c] === 1) continue;
      lines.push(`${timeText('long', scans.timesMs[k])},${site.channels[c].name},${value}`);
    }
  return lines;
}

function timeText(habit: LogHabit, timeMs: number): string {
  const iso = new Date(habit === 'wide-local' ? timeMs + LOCAL_OFFSET_MS : timeMs).toISOString();
  return habit === 'wide-local' ? iso.slice(0, 19).replace('T', ' ') : `${iso.slice(0, 19)}Z`;
}

/** A few rows written twice, as after a restart of the logger, and a few that changed places with their neighbour. */
function disturbOrder(lines: string[], random: Random): void {
  for (let i = 0; i < 12; i++) {
    const at = Math.floor(random.uniform() * lines.length);
    lines.splice(at, 0, lines[at]);
  }
  for (let i = 0; i < 8; i++) {
    const at = Math.floor(random.uniform() * (lines.length - 1));
    const line = lines[at];
    lines[at] = lines[at + 1];
    lines[at + 1] = line;
  }
}
