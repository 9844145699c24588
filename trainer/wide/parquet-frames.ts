/**
 * Frames from a Parquet file, one a row: a column that holds a list of numbers, or a column for each number. A column of
 * timestamps says when they were taken. Streamed through DuckDB.
 *
 * DuckDB hands on up to 2,048 rows of a row group at once, so that a row group of long frames has to fit in memory; where it
 * does not, that is said before anything is read.
 */
import type { DuckDBConnection, DuckDBDataChunk, DuckDBFloatVector, DuckDBListVector } from '@duckdb/node-api';
import { TrainError } from '../errors.ts';
import { refusal, shown } from '../history/refusal.ts';
import { checkFinite } from './finite-frames.ts';
import type { FrameChunk, FrameSource, FrameTimes } from './frames.ts';
import { inspectRecording } from './recording-file.ts';

/** Rows DuckDB hands on at once, at most. */
const VECTOR_ROWS = 2048;
/** Bytes of frames that may have to be held at once where nothing else is said. */
const MOST_BYTES = 64 << 20;
/** Bytes of frames handed on at once; at least one frame. */
const CHUNK_BYTES = 4 << 20;
const MAGIC = 'PAR1';
const NUMBERS = /^(U?(TINY|SMALL|BIG)INT|U?INTEGER|FLOAT|DOUBLE|DECIMAL.*)$/;
const LISTS = /^(U?(TINY|SMALL|BIG)INT|U?INTEGER|FLOAT|DOUBLE|DECIMAL[^[]*)\[\d*\]$/;

/** Columns by what they hold. */
interface Columns {
  readonly list: string | null;
  readonly bins: readonly string[];
  readonly time: string | null;
}

/**
 * Opens a recording; TrainError 'file' where there is none, 'history' where it is no Parquet file, has no frames, or frames
 * that are not alike.
 *
 * units  mostBytes of frames held at once
 */
export async function openParquetFrames(
  path: string,
  times: FrameTimes = {},
  mostBytes = MOST_BYTES,
): Promise<FrameSource> {
  checkEdges(path);
  return await asked(path, async (connection) => {
    const columns = await columnsOf(connection, path);
    const [count, rows] = (await one(
      connection,
      `SELECT (SELECT count(*) FROM read_parquet($1)),
        (SELECT max(row_group_num_rows) FROM parquet_metadata($1))`,
      path,
    )) as [bigint, bigint];
    if (Number(count) === 0) throw refusal({ file: path }, 'frames', 'no rows', 'check how it was written');
    const frameLength = columns.list === null ? columns.bins.length : await lengthOf(connection, path, columns.list);
    const most = Math.max(1, Math.floor(mostBytes / (4 * frameLength)));
    if (Math.min(VECTOR_ROWS, Number(rows)) > most)
      throw refusal(
        { file: path },
        `row groups of at most ${most} frames, since a frame has ${frameLength} numbers`,
        `${rows}`,
        'write it with smaller row groups, or as .npy',
      );
    const taken = columns.time === null ? null : await timesOf(connection, path, columns.time, Number(count));
    return {
      name: path,
      frameLength,
      count: Number(count),
      startMs: taken?.startMs ?? times.startMs ?? null,
      tickMs: taken?.tickMs ?? times.tickMs ?? null,
      chunks: () => readChunks(path, columns, frameLength, Number(count)),
    };
  });
}

/** A Parquet file begins and ends with the same four letters (format specification, "File format"). */
function checkEdges(path: string): void {
  const { bytes, begins, ends } = inspectRecording(path);
  if (begins !== MAGIC) throw refusal({ file: path }, 'a Parquet file', 'another kind of file', 'check the path');
  if (ends !== MAGIC || bytes < 12)
    throw refusal({ file: path }, 'a whole Parquet file', 'one without its end', 'it was cut short: fetch it again');
}

async function columnsOf(connection: DuckDBConnection, path: string): Promise<Columns> {
  const reader = await connection.runAndReadAll(
    'SELECT column_name, column_type FROM (DESCRIBE SELECT * FROM read_parquet($1))',
    [thisFile(path)],
  );
  const all = reader.getRows() as [string, string][];
  const named = (kind: RegExp): string[] => all.filter(([, type]) => kind.test(type)).map(([name]) => name);
  const [lists, bins, stamps] = [named(LISTS), named(NUMBERS), named(/^TIMESTAMP/)];
  const found = all.map(([name, type]) => `${name} ${type}`).join(', ');
  if (lists.length > 1 || stamps.length > 1 || (lists.length === 0 && bins.length === 0))
    throw refusal(
      { file: path },
      'one column with a list of numbers, or columns of numbers, and at most one of timestamps',
      shown(found),
      'write the columns of the frames alone',
    );
  return { list: lists[0] ?? null, bins: lists.length === 1 ? [] : bins, time: stamps[0] ?? null };
}

async function lengthOf(connection: DuckDBConnection, path: string, list: string): Promise<number> {
  const [length] = await one(connection, `SELECT len(${quoted(list)}) FROM read_parquet($1) LIMIT 1`, path);
  if (length === null || Number(length) === 0)
    throw refusal({ file: path, field: list }, 'a list of numbers in the first row', 'none', 'leave empty rows out');
  return Number(length);
}

/** Start and tick; refused where frames do not come evenly, which no window would notice. */
async function timesOf(
  connection: DuckDBConnection,
  path: string,
  time: string,
  count: number,
): Promise<{ startMs: number; tickMs: number | null }> {
  const [start, end, least, most, none] = (
    await one(
      connection,
      `SELECT min(t), max(t), min(step), max(step), count(*) FILTER (t IS NULL)
       FROM (SELECT t, t - lag(t) OVER (ORDER BY n) AS step FROM (
         SELECT epoch_us(${quoted(time)}) AS t, file_row_number AS n FROM read_parquet($1, file_row_number = true)))`,
      path,
    )
  ).map((value) => Number(value) / 1000);
  if (none > 0)
    throw refusal({ file: path, field: time }, 'a time in every row', 'none in some', 'leave those rows out');
  if (count === 1) return { startMs: start, tickMs: null };
  const tickMs = (end - start) / (count - 1);
  if (least <= 0 || least < 0.5 * tickMs || most > 1.5 * tickMs)
    throw refusal(
      { file: path, field: time },
      `frames some ${tickMs} ms apart, in order`,
      `steps from ${least} to ${most} ms`,
      'sort it, and cut it where frames are missing',
    );
  return { startMs: start, tickMs };
}

async function* readChunks(
  path: string,
  { list, bins }: Columns,
  frameLength: number,
  count: number,
): AsyncGenerator<FrameChunk> {
  const none = '[]::FLOAT[]';
  const wanted =
    list === null ? bins.map((name) => `${quoted(name)}::FLOAT`) : [`coalesce(${quoted(list)}::FLOAT[], ${none})`];
  const most = Math.max(1, Math.floor(CHUNK_BYTES / (4 * frameLength)));
  const values = new Float32Array(most * frameLength);
  const instance = await openDatabase();
  const connection = await instance.connect();
  try {
    const result = await connection.stream(`SELECT ${wanted.join(', ')} FROM read_parquet($1)`, [thisFile(path)]);
    let frame = 0;
    for (;;) {
      const chunk = await result.fetchChunk();
      if (chunk === null || chunk.rowCount === 0) break;
      for (let row = 0; row < chunk.rowCount; row += most) {
        const rows: Rows = { chunk, row, count: Math.min(most, chunk.rowCount - row), first: frame };
        if (list === null) takeBins(path, bins, rows, values);
        else takeLists(path, list, rows, values, frameLength);
        checkFinite(path, values, rows.count * frameLength, frameLength, frame + row);
        yield { count: rows.count, values };
      }
      frame += chunk.rowCount;
    }
    if (frame < count) throw await whyShort(connection, path, wanted, frame);
  } catch (cause) {
    throw asRefusal(path, cause);
  } finally {
    connection.closeSync();
    instance.closeSync();
  }
}

/** A stream that fails far from its beginning ends without a word: asked outright for the rest, it says why. */
async function whyShort(
  connection: DuckDBConnection,
  path: string,
  wanted: readonly string[],
  frame: number,
): Promise<unknown> {
  const largest = wanted.map((one) => `max(${one})`).join(', ');
  try {
    await one(
      connection,
      `SELECT ${largest} FROM read_parquet($1, file_row_number = true) WHERE file_row_number >= ${frame}`,
      path,
    );
  } catch (cause) {
    return cause;
  }
  return refusal({ file: path }, 'a file that stays as it was opened', 'its end', 'read it when it is complete');
}

/** Some rows of a chunk, `first` the frame that the chunk begins with. */
interface Rows {
  readonly chunk: DuckDBDataChunk;
  readonly row: number;
  readonly count: number;
  readonly first: number;
}

function takeBins(path: string, bins: readonly string[], { chunk, row, count, first }: Rows, out: Float32Array): void {
  bins.forEach((name, k) => {
    const vector = chunk.getColumnVector(k) as DuckDBFloatVector;
    for (let i = 0; i < count; i++) {
      const value = vector.getItem(row + i);
      if (value === null) throw missing(path, name, first + row + i);
      out[i * bins.length + k] = value;
    }
  });
}

function takeLists(
  path: string,
  list: string,
  { chunk, row, count, first }: Rows,
  out: Float32Array,
  frameLength: number,
): void {
  const vector = chunk.getColumnVector(0) as DuckDBListVector;
  const numbers = vector.childVector as DuckDBFloatVector;
  for (let i = 0; i < count; i++) {
    const length = vector.getEntryLength(row + i);
    if (length !== frameLength)
      throw refusal(
        { file: path, field: list },
        `${frameLength} numbers in every row, as in the first`,
        `${length} in row ${first + row + i} (from 0)`,
        'leave such rows out',
      );
    const at = vector.getEntryOffset(row + i);
    for (let k = 0; k < length; k++) {
      const value = numbers.getItem(at + k);
      if (value === null) throw missing(path, list, first + row + i);
      out[i * frameLength + k] = value;
    }
  }
}

function missing(path: string, field: string, row: number): Error {
  return refusal({ file: path, field }, 'a number', `none in row ${row} (from 0)`, 'fill it, or leave the row out');
}

async function openDatabase(): Promise<import('@duckdb/node-api').DuckDBInstance> {
  // Only who has such a file pays for the library.
  const { DuckDBInstance } = await import('@duckdb/node-api');
  return await DuckDBInstance.create(':memory:', { threads: '1' });
}

async function asked<T>(path: string, work: (connection: DuckDBConnection) => Promise<T>): Promise<T> {
  const instance = await openDatabase();
  const connection = await instance.connect();
  try {
    return await work(connection);
  } catch (cause) {
    throw asRefusal(path, cause);
  } finally {
    connection.closeSync();
    instance.closeSync();
  }
}

async function one(connection: DuckDBConnection, sql: string, path: string): Promise<unknown[]> {
  return (await connection.runAndReadAll(sql, [thisFile(path)])).getRows()[0] as unknown[];
}

/** The library's word on a file in one sentence of ours. */
function asRefusal(path: string, cause: unknown): unknown {
  if (cause instanceof TrainError) return cause;
  const { message } = cause as Error;
  const refuse = (expected: string, got: string, remedy: string): Error =>
    refusal({ file: path }, expected, got, remedy, { cause });
  if (/^Out of Memory/i.test(message))
    return refuse('row groups that fit in memory', 'larger ones', 'write it with smaller row groups, or as .npy');
  if (/^Conversion Error/i.test(message))
    return refuse('numbers that float32 can hold, up to 3.4e38', 'a larger one', 'scale the frames, or take it out');
  return refuse('a whole Parquet file', 'a damaged one', 'fetch it again, or write it anew');
}

/** A path that means this one file, whatever letters its name has. */
function thisFile(path: string): string {
  return path.replace(/[[*?]/g, '[$&]');
}

function quoted(name: string): string {
  return `"${name.replaceAll('"', '""')}"`;
}
