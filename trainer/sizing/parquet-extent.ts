/** What a Parquet file says of itself: rows, and the least and largest time of its row groups. No row is read. */
import type { Site } from '@stillwell/protocol';
import { TrainError } from '../errors.ts';
import { channelsOf } from '../history/channels.ts';
import type { InputFile } from '../history/input-file.ts';
import type { FileExtent } from './history-extent.ts';

const TIME_TYPE = /^(TIMESTAMP|DATE)/;

/**
 * Reads the file's footer.
 *
 * throws  TrainError 'history' where it is no Parquet file, or no column holds times
 */
export async function parquetExtent({ path }: InputFile, site: Site): Promise<FileExtent> {
  // The library takes a third of a second to load, which text files need not wait for.
  const { DuckDBInstance } = await import('@duckdb/node-api');
  const instance = await DuckDBInstance.create(':memory:');
  const connection = await instance.connect();
  const rowsOf = async (query: string): Promise<unknown[][]> =>
    (await connection.runAndReadAll(query, [path])).getRows();
  try {
    const columns = (await rowsOf(
      'SELECT column_name, column_type FROM (DESCRIBE SELECT * FROM read_parquet($1))',
    )) as [string, string][];
    const time = columns.find(([, type]) => TIME_TYPE.test(type))?.[0];
    if (time === undefined) throw noTime(path, columns);
    const quoted = `"${time.replaceAll('"', '""')}"`;
    const [[rows, from, to]] = (await rowsOf(
      `SELECT count(*), epoch_ms(min(${quoted})::TIMESTAMP), epoch_ms(max(${quoted})::TIMESTAMP) FROM read_parquet($1)`,
    )) as [[bigint, bigint | null, bigint | null]];
    const names = new Set(columns.map(([name]) => name));
    const held = channelsOf(site).filter(({ column }) => names.has(column)).length;
    return {
      textBytes: 0,
      rows: Number(rows),
      // A long table has one reading a row.
      readings: Number(rows) * Math.max(1, held),
      fromMs: from === null ? Number.POSITIVE_INFINITY : Number(from),
      toMs: to === null ? Number.NEGATIVE_INFINITY : Number(to),
      isExact: true,
    };
  } catch (cause) {
    if (cause instanceof TrainError) throw cause;
    throw new TrainError(
      'history',
      `${path}: expected a Parquet file, got one that cannot be read (${(cause as Error).message.split('\n')[0]}); export it again`,
      { cause },
    );
  } finally {
    connection.closeSync();
    instance.closeSync();
  }
}

function noTime(path: string, columns: readonly [string, string][]): TrainError {
  const found = columns.map(([name, type]) => `${name} ${type}`).join(', ');
  return new TrainError(
    'history',
    `${path}: expected a column of timestamps, got ${found}; write the time as a TIMESTAMP column`,
  );
}
