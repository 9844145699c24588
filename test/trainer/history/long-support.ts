/** Long histories made small: limits of a few dozen ticks, a sink that keeps what it is handed, files by the columnar library. */
import type { DuckDBConnection } from '@duckdb/node-api';
import type { Site } from '../../../protocol/index.ts';
import { type LongHistory, type LongOptions, loadLong, type OlderSink } from '../../../trainer/history/long.ts';
import type { LongLimits } from '../../../trainer/history/recent.ts';
import type { Series } from '../../../trainer/history/series.ts';
import { seededNumbers } from '../../support/models.ts';

export const LIMITS: LongLimits = { longFrom: 96, recentTicks: 64, chunkTicks: 16, blockBytes: 256 };
export const START = Date.UTC(2024, 0, 1);
export const MINUTE = 60_000;

/** Keeps copies of the chunks; its snapshot is all of them. */
export class KeepingSink implements OlderSink {
  chunks: { firstTick: number; values: number[][]; excluded: number[] | null }[] = [];

  take({ firstTick, values, excluded }: Series): void {
    this.chunks.push({
      firstTick,
      values: values.map((one) => [...one]),
      excluded: excluded === undefined ? null : [...excluded.isExcluded],
    });
  }

  snapshot(): Uint8Array {
    return Buffer.from(JSON.stringify(this.chunks));
  }

  restore(bytes: Uint8Array): void {
    const missing = (one: (number | null)[]): number[] => one.map((value) => value ?? Number.NaN);
    this.chunks = (JSON.parse(Buffer.from(bytes).toString()) as KeepingSink['chunks']).map((chunk) => ({
      ...chunk,
      values: chunk.values.map(missing),
    }));
  }

  /** All ticks of a channel, one chunk after the other. */
  channel(c: number): number[] {
    return this.chunks.flatMap(({ values }) => values[c] as number[]);
  }
}

/** What came of a long reading. */
export interface Streamed {
  readonly loaded: LongHistory;
  readonly sink: KeepingSink;
  /** Values of every channel over older and newest part. */
  readonly values: number[][];
}

/** Reads with small limits. */
export async function stream(
  paths: readonly string[],
  site: Site,
  options: Partial<LongOptions> = {},
): Promise<Streamed> {
  let sink = new KeepingSink();
  const loaded = await loadLong(paths, site, { zone: null, limits: LIMITS, ...options }, () => {
    sink = new KeepingSink();
    return sink;
  });
  const values = loaded.series.values.map((newest, c) => [...sink.channel(c), ...newest]);
  return { loaded, sink, values };
}

/** A row of a plant: time and readings by name; null where there is none. */
export interface Row {
  readonly time: number;
  readonly level: number | null;
  readonly flow: number | null;
}

/** Rows a minute apart, a tenth of the levels missing. */
export function rows(count: number, seed = 1): Row[] {
  const draw = seededNumbers(seed);
  return Array.from({ length: count }, (_, n) => ({
    time: START + n * MINUTE,
    level: draw() < 0.1 ? null : Math.round(draw() * 1000) / 100,
    flow: Math.floor(draw() * 90),
  }));
}

const iso = (ms: number): string => new Date(ms).toISOString();
const cell = (value: number | null): string => (value === null ? '' : String(value));

/** The rows as wide CSV. */
export function wideCsv(all: readonly Row[]): string {
  return ['time,level,flow', ...all.map((r) => `${iso(r.time)},${cell(r.level)},${cell(r.flow)}`), ''].join('\n');
}

/** The rows as long NDJSON. */
export function ndjson(all: readonly Row[]): string {
  return all
    .flatMap((r) => [
      JSON.stringify({ time: iso(r.time), signal: 'level', value: r.level }),
      JSON.stringify({ time: iso(r.time), signal: 'flow', value: r.flow }),
    ])
    .join('\n');
}

/** A connection of the columnar library, to write files by. */
export async function columns(): Promise<DuckDBConnection> {
  const { DuckDBInstance } = await import('@duckdb/node-api');
  const connection = await (await DuckDBInstance.create(':memory:', { threads: '1' })).connect();
  await connection.run("SET timezone = 'UTC'");
  return connection;
}

/** Writes a question's answer to a file. */
export async function copy(
  connection: DuckDBConnection,
  question: string,
  path: string,
  how = 'FORMAT parquet',
): Promise<string> {
  await connection.run(`COPY (${question}) TO '${path.replaceAll("'", "''")}' (${how})`);
  return path;
}
