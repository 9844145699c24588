/**
 * Histories of any number of signals for sizing: an invented plant read once a minute, whose signals swing with the day in a shape
 * of their own, wander, ring and follow the one before after a dead time, printed to a hundredth.
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
  const plant = Array.from({ length: signals }, (_, c) => new SignalOf(c, normal));
  for (let from = 0; from < ticks; from += BLOCK_ROWS) {
    const lines: string[] = [];
    for (let t = from; t < Math.min(ticks, from + BLOCK_ROWS); t++) {
      const cells = plant.map((one, c) => one.next(t, c === 0 ? null : plant[c - 1]!).toFixed(2));
      lines.push([new Date(FIRST_MS + t * TICK_MS).toISOString(), ...cells].join(','));
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

/** Ticks after which a signal follows the one before it. */
const DEAD_TICKS = 7;

class SignalOf {
  readonly #c: number;
  readonly #normal: () => number;
  /** The newest departures, the last DEAD_TICKS of them. */
  readonly #ring = new Float64Array(DEAD_TICKS);
  #wander = 0;
  #swing: [number, number] = [0, 0];
  #at = 0;

  constructor(c: number, normal: () => number) {
    this.#c = c;
    this.#normal = normal;
  }

  /** Departure of DEAD_TICKS ago. */
  get late(): number {
    return this.#ring[this.#at]!;
  }

  next(t: number, before: SignalOf | null): number {
    const c = this.#c;
    const day = (2 * Math.PI * (t + 97 * c)) / DAY;
    const shape = 2 * Math.sin(day) + (0.4 + 0.2 * (c % 3)) * Math.sin(2 * day + c) + 0.3 * Math.sin(3 * day - c);
    this.#wander = 0.985 * this.#wander + 0.25 * this.#normal() + 0.04 * (before?.late ?? 0);
    const [x, y] = this.#swing;
    const turn = (2 * Math.PI) / (18 + 9 * (c % 6));
    this.#swing = [
      0.97 * (Math.cos(turn) * x - Math.sin(turn) * y) + 0.2 * this.#normal(),
      0.97 * (Math.sin(turn) * x + Math.cos(turn) * y),
    ];
    const departure = this.#wander + this.#swing[0];
    this.#ring[this.#at] = departure;
    this.#at = (this.#at + 1) % DEAD_TICKS;
    return 20 + 3 * (c % 7) + shape + departure + 0.1 * this.#normal();
  }
}
