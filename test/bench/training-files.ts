/**
 * The plant's history as files: Parquet for ours, NumPy's array format for the peers, which read no Parquet here. Written in pieces,
 * so that ten million rows take no more memory than ten thousand.
 */
import { closeSync, openSync, rmSync, writeSync } from 'node:fs';
import { DOUBLE, type DuckDBConnection, DuckDBDataChunk, DuckDBInstance } from '@duckdb/node-api';
import { FIRST_TICK, PlantStream, SIGNAL_COUNT, SIGNAL_NAMES, TICK_MS } from './training-plant.ts';

/** Seed of every history of this suite: a longer one begins as a shorter one does. */
export const SEED = 20_040_101;
/** Rows of a DuckDB vector. */
const VECTOR_ROWS = 2048;
const PIECE_ROWS = 128 * VECTOR_ROWS;
/** NumPy pads its header to whole blocks of so many bytes; peers in other languages pass over one. */
export const ARRAY_HEADER_BYTES = 128;

/** Where to write: Parquet, and beside it an array where a peer needs one. */
export interface PlantFiles {
  readonly parquet: string;
  readonly array: string | null;
}

/**
 * Writes `rows` ticks of the plant, from `skip` ticks after its first on. The Parquet file has a column of times (UTC, to the
 * microsecond) and one a signal, as data frames are usually exported; missing readings are null there and NaN in the array.
 */
export async function writePlant(files: PlantFiles, rows: number, skip = 0): Promise<void> {
  const instance = await DuckDBInstance.create(':memory:', { memory_limit: '300MB', threads: '2' });
  const connection = await instance.connect();
  const array = files.array === null ? null : openSync(files.array, 'w');
  const parts: string[] = [];
  try {
    if (array !== null) writeSync(array, arrayHeader(rows));
    for (const [part, first] of pieces(rows, skip)) {
      if (array !== null) writeSync(array, new Uint8Array(part.buffer, part.byteOffset, part.byteLength));
      parts.push(`${files.parquet}.${parts.length}`);
      await writePart(connection, parts[parts.length - 1]!, part, first);
    }
    const all = parts.map(quoted).join(', ');
    await connection.run(`copy (from read_parquet([${all}])) to ${quoted(files.parquet)} (format parquet)`);
  } finally {
    if (array !== null) closeSync(array);
    connection.closeSync();
    instance.closeSync();
    for (const part of parts) rmSync(part, { force: true });
  }
}

/** A part of the rows as a file of its own: what a table holds is in memory, and a file's rows are not. */
async function writePart(connection: DuckDBConnection, path: string, part: Float64Array, first: number): Promise<void> {
  const names = SIGNAL_NAMES.map((name) => `"${name}"`);
  await connection.run(`create table part (tick double, ${names.map((name) => `${name} double`).join(', ')})`);
  const appender = await connection.createAppender('part');
  for (let at = 0; at < part.length; at += VECTOR_ROWS * SIGNAL_COUNT) {
    const now = part.subarray(at, at + VECTOR_ROWS * SIGNAL_COUNT);
    appender.appendDataChunk(chunkOf(now, first + at / SIGNAL_COUNT));
  }
  appender.closeSync();
  const columns = `to_timestamp(tick * ${TICK_MS / 1000}) as time, ${names.join(', ')}`;
  await connection.run(`copy (select ${columns} from part) to ${quoted(path)} (format parquet)`);
  await connection.run('drop table part');
}

/** A path in SQL. */
function quoted(path: string): string {
  return `'${path.replaceAll("'", "''")}'`;
}

/** Pieces of the plant and their first ticks. */
function* pieces(rows: number, skip: number): Generator<readonly [Float64Array, number]> {
  const plant = new PlantStream(SEED);
  const piece = new Float64Array(PIECE_ROWS * SIGNAL_COUNT);
  for (let left = skip; left > 0; left -= PIECE_ROWS)
    plant.next(piece.subarray(0, Math.min(left, PIECE_ROWS) * SIGNAL_COUNT));
  for (let done = 0; done < rows; done += PIECE_ROWS) {
    const now = piece.subarray(0, Math.min(rows - done, PIECE_ROWS) * SIGNAL_COUNT);
    plant.next(now);
    yield [now, FIRST_TICK + skip + done];
  }
}

function chunkOf(piece: Float64Array, firstTick: number): DuckDBDataChunk {
  const rows = piece.length / SIGNAL_COUNT;
  const chunk = DuckDBDataChunk.create(
    Array.from({ length: SIGNAL_COUNT + 1 }, () => DOUBLE),
    rows,
  );
  for (let c = 0; c <= SIGNAL_COUNT; c++) {
    const vector = chunk.getColumnVector(c);
    for (let n = 0; n < rows; n++) {
      const value = c === 0 ? firstTick + n : piece[n * SIGNAL_COUNT + c - 1]!;
      vector.setItem(n, Number.isNaN(value) ? null : value);
    }
    vector.flush();
  }
  return chunk;
}

/** Header of a .npy file, version 1.0: NumPy Enhancement Proposal 1. */
export function arrayHeader(rows: number): Buffer {
  const text = `{'descr': '<f8', 'fortran_order': False, 'shape': (${rows}, ${SIGNAL_COUNT}), }`;
  const header = Buffer.alloc(ARRAY_HEADER_BYTES, ' ');
  header.write('\x93NUMPY\x01\x00', 'latin1');
  header.writeUInt16LE(ARRAY_HEADER_BYTES - 10, 8);
  header.write(text, 10, 'latin1');
  header.write('\n', ARRAY_HEADER_BYTES - 1);
  return header;
}
