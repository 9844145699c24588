/**
 * The library that reads columnar files (and unpacks what zlib cannot), loaded only where a history needs it: it costs a
 * tenth of a second and twenty megabytes. Kept small: one thread, little memory, no network, no extensions fetched;
 * sorting that does not fit spills into a folder that is taken away again.
 *
 * A streamed result that fails simply ends, so whoever streams must know how many rows there are, and ask again for the
 * rest to learn the reason.
 */
import { existsSync, mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { dirname, join, resolve } from 'node:path';
import { setFlagsFromString } from 'node:v8';
import { runInNewContext } from 'node:vm';
import type { DuckDBConnection, DuckDBDataChunk, DuckDBInstance } from '@duckdb/node-api';
import { TrainError } from '../errors.ts';
import { unwritable } from '../output-file.ts';
import { refusal } from './refusal.ts';

/** Enough for row groups of a million rows and for sorting with spills; raised once where a file needs more. */
const MEMORY = '48MB';
const MORE_MEMORY = '512MB';
/** Chunks between two collections of young garbage: their memory is outside the heap, which knows nothing of its size. */
const COLLECT_EVERY = 16;

/** A row of a small answer. */
export type AnswerRow = Readonly<Record<string, unknown>>;

let collector: ((options: { type: 'minor' }) => void) | null = null;

/** Frees chunks no longer used. A full collection would cost more, and waiting for one lets memory grow to hundreds of MB. */
function collect(): void {
  if (collector === null) {
    setFlagsFromString('--expose-gc');
    collector = runInNewContext('gc') as NonNullable<typeof collector>;
  }
  collector({ type: 'minor' });
}

/** Where the library has no build for a machine, text can still be read. */
async function load(): Promise<typeof import('@duckdb/node-api')> {
  try {
    return await import('@duckdb/node-api');
  } catch (cause) {
    throw new TrainError(
      'file',
      'Parquet and Zstandard files need the library @duckdb/node-api, which cannot be loaded on this machine; give the history as CSV or NDJSON, plain or .gz',
      { cause },
    );
  }
}

/** One engine for the files of a history. */
export class ColumnsEngine {
  readonly #spillIn: string;
  #instance: DuckDBInstance | null = null;
  #spill: string | null = null;
  #connections: DuckDBConnection[] = [];
  #hasMore = false;

  /** spillIn  folder in which sorting may spill; the system's temporary folder when absent */
  constructor(spillIn: string = tmpdir()) {
    this.#spillIn = spillIn;
  }

  /** A connection of its own for one file, since a new question ends the stream before it. */
  async connect(): Promise<DuckDBConnection> {
    if (this.#instance === null) {
      const { DuckDBInstance } = await load();
      this.#instance = await DuckDBInstance.create(':memory:', {
        threads: '1',
        memory_limit: MEMORY,
        temp_directory: '',
        autoinstall_known_extensions: 'false',
        autoload_known_extensions: 'false',
      });
    }
    const connection = await this.#instance.connect();
    this.#connections.push(connection);
    return connection;
  }

  /** Lets queries spill. */
  async allowSpill(connection: DuckDBConnection): Promise<void> {
    if (this.#spill !== null) return;
    // The folder of the output may not be there yet: then the nearest one above it.
    let folder = resolve(this.#spillIn);
    while (!existsSync(folder) && dirname(folder) !== folder) folder = dirname(folder);
    try {
      this.#spill = mkdtempSync(join(folder, '.stillwell-sort-'));
    } catch (cause) {
      throw unwritable(folder, cause as Error);
    }
    await connection.run(`SET temp_directory = ${quoted(this.#spill)}`);
  }

  /** Gives a file that needs it more memory; false where it has it already. */
  async raiseMemory(connection: DuckDBConnection): Promise<boolean> {
    if (this.#hasMore) return false;
    this.#hasMore = true;
    await connection.run(`SET memory_limit = '${MORE_MEMORY}'`);
    return true;
  }

  close(): void {
    for (const connection of this.#connections) connection.closeSync();
    this.#connections = [];
    this.#instance?.closeSync();
    this.#instance = null;
    if (this.#spill !== null) rmSync(this.#spill, { recursive: true, force: true });
    this.#spill = null;
  }
}

/** A small answer as plain rows. */
export async function ask(connection: DuckDBConnection, path: string, sql: string): Promise<AnswerRow[]> {
  try {
    return (await connection.runAndReadAll(sql)).getRowObjectsJson();
  } catch (cause) {
    throw engineRefusal(path, cause as Error);
  }
}

/** Chunks of a streamed answer; it may end too early without a word. */
export async function* chunksOf(
  connection: DuckDBConnection,
  path: string,
  sql: string,
): AsyncGenerator<DuckDBDataChunk> {
  try {
    const result = await connection.stream(sql);
    for (let count = 1; ; count++) {
      const chunk = await result.fetchChunk();
      if (chunk === null || chunk.rowCount === 0) return;
      yield chunk;
      if (count % COLLECT_EVERY === 0) collect();
    }
  } catch (cause) {
    throw engineRefusal(path, cause as Error);
  }
}

/** Text as a literal. */
export function quoted(text: string): string {
  return `'${text.replaceAll("'", "''")}'`;
}

/** A path as a literal that means this one file, whatever letters its name has. */
export function quotedPath(path: string): string {
  return quoted(path.replace(/[[*?]/g, '[$&]'));
}

/** A column's name as an identifier. */
export function named(column: string): string {
  return `"${column.replaceAll('"', '""')}"`;
}

/** True for a query that found its memory too small. */
export function isOutOfMemory(cause: unknown): boolean {
  return cause instanceof Error && /^Out of Memory/i.test((cause.cause as Error | undefined)?.message ?? cause.message);
}

/** The engine's word on a file in one sentence of ours. */
export function engineRefusal(path: string, cause: Error): TrainError {
  const text = cause.message;
  if (/No space left|disk is full|max_temp_directory_size/i.test(text))
    return new TrainError('file', `${path}: cannot be sorted by time: the disk is full; clear some space`, { cause });
  if (/^Out of Memory/i.test(text))
    return new TrainError(
      'history',
      `${path}: expected parts that fit into ${MORE_MEMORY}, got larger ones; write it with smaller row groups`,
      { cause },
    );
  if (/permission denied/i.test(text))
    return new TrainError('file', `${path}: may not be read; check the file's permissions`, { cause });
  return refusal({ file: path }, 'a whole Parquet file', 'a damaged or cut-off one', 'copy or export it again', {
    cause,
  });
}
