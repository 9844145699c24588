/**
 * Histories of any number of signals for sizing: an invented plant read once a minute, whose signals swing with the day, wander
 * by themselves and follow the one before, printed to a hundredth.
 */
import { once } from 'node:events';
import { createWriteStream, rmSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { finished } from 'node:stream/promises';
import { uniforms } from './known-plant.ts';

/** What a history and its site are to be. */
export interface SizeShape {
  readonly signals: number;
  readonly ticks: number;
  readonly horizon: number;
  /** log.parquet in place of log.csv. */
  readonly isParquet?: boolean;
}

/** Name of the file. */
export function logName({ isParquet }: SizeShape): string {
  return isParquet === true ? 'log.parquet' : 'log.csv';
}

const FIRST_MS = Date.UTC(2015, 0, 1);
const TICK_MS = 60_000;
const DAY = 1440;
const BLOCK_ROWS = 4096;

/** Writes site.yaml and the log into a folder. */
export async function writeSizePlant(folder: string, shape: SizeShape, seed = 11): Promise<void> {
  const { signals, ticks, horizon } = shape;
  const names = Array.from({ length: signals }, (_, c) => `s${c + 1}`);
  const site = ['site: long-weir', 'time_zone: UTC', 'tick: 1min', `horizon: ${horizon}`, 'signals:'];
  writeFileSync(join(folder, 'site.yaml'), `${[...site, ...names.map((name) => `  - {name: ${name}}`)].join('\n')}\n`);
  const out = createWriteStream(join(folder, 'log.csv'));
  out.write(`time,${names.join(',')}\n`);
  const next = uniforms(seed);
  const normal = (): number => next() + next() + next() + next() - 2;
  const wander = new Float64Array(signals);
  for (let from = 0; from < ticks; from += BLOCK_ROWS) {
    const lines: string[] = [];
    for (let t = from; t < Math.min(ticks, from + BLOCK_ROWS); t++) {
      const cells = [new Date(FIRST_MS + t * TICK_MS).toISOString()];
      for (let c = 0; c < signals; c++) {
        const before = c === 0 ? 0 : wander[c - 1]!;
        wander[c] = 0.97 * wander[c]! + 0.02 * before + 0.3 * normal();
        const swing = (2 + 0.1 * (c % 5)) * Math.sin((2 * Math.PI * (t + 40 * c)) / DAY);
        cells.push((20 + 3 * (c % 7) + swing + wander[c]! + 0.2 * normal()).toFixed(2));
      }
      lines.push(cells.join(','));
    }
    if (!out.write(`${lines.join('\n')}\n`)) await once(out, 'drain');
  }
  out.end();
  await finished(out);
  if (shape.isParquet === true) await asParquet(join(folder, 'log.csv'), join(folder, logName(shape)));
}

async function asParquet(from: string, to: string): Promise<void> {
  const { DuckDBInstance } = await import('@duckdb/node-api');
  const instance = await DuckDBInstance.create(':memory:');
  const connection = await instance.connect();
  await connection.run(`COPY (SELECT * FROM read_csv('${from}')) TO '${to}'`);
  connection.closeSync();
  instance.closeSync();
  rmSync(from);
}
