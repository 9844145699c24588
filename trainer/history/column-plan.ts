/**
 * What a columnar file holds, held against a site: which column is the time and of what kind, which are signals, and how
 * they are asked for. Wrong types are refused here, before any row is read.
 */
import type { DuckDBConnection } from '@duckdb/node-api';
import { type AnswerRow, ask, named, quoted, quotedPath } from './columns-engine.ts';
import { longColumns, timeColumn } from './csv-header.ts';
import { refusal, shown } from './refusal.ts';

/** How times are written: instants, local times without a zone, counts since 1970, or text. */
export type ColumnTime = 'instant' | 'local' | 'count' | 'text';

/** A column as the file declares it. */
export interface Column {
  readonly name: string;
  readonly type: string;
}

/** What to ask for. */
export interface ColumnPlan {
  readonly format: 'wide Parquet' | 'long Parquet';
  readonly time: ColumnTime;
  readonly timeName: string;
  /** Wide: channels in the order of the columns asked for. Long: empty. */
  readonly channels: readonly number[];
  /** Names of the value columns, as `channels`; of the one value column of a long file. */
  readonly valueNames: readonly string[];
  /** Column of signal names in a long file; null in a wide one, or where the folder names the signal. */
  readonly signalName: string | null;
  /** Signal named by a folder, signal=NAME; null otherwise. */
  readonly folderSignal: string | null;
  readonly columnsIgnored: readonly string[];
  readonly rows: number;
}

const NUMBERS = /^(U?(TINY|SMALL|BIG|HUGE)INT|U?INTEGER|FLOAT|DOUBLE|DECIMAL.*|BOOLEAN)$/;
const TEXT = /^(VARCHAR|ENUM.*)$/;

/** Words for a declared type. */
function words(type: string): string {
  if (TEXT.test(type)) return 'text';
  if (NUMBERS.test(type)) return type === 'BOOLEAN' ? 'yes or no' : 'numbers';
  if (/^(TIMESTAMP|DATE|TIME)/.test(type)) return 'times';
  if (type === 'BLOB') return 'bytes';
  return type.endsWith(']') ? 'lists' : type.startsWith('STRUCT') ? 'records' : type.toLowerCase();
}

/** Columns of a file, the rows in it, and which columns are instants. */
export async function describeColumns(
  connection: DuckDBConnection,
  path: string,
): Promise<{ readonly columns: readonly Column[]; readonly instants: ReadonlySet<string>; readonly rows: number }> {
  const file = quotedPath(path);
  const described = await ask(
    connection,
    path,
    `DESCRIBE SELECT * FROM read_parquet(${file}, hive_partitioning = false)`,
  );
  const schema = await ask(
    connection,
    path,
    `SELECT name, type, converted_type, logical_type FROM parquet_schema(${file})`,
  );
  const [facts] = await ask(connection, path, `SELECT num_rows FROM parquet_file_metadata(${file})`);
  return {
    columns: described.map((row) => ({ name: String(row.column_name), type: String(row.column_type) })),
    instants: new Set(schema.filter(isInstant).map((row) => String(row.name))),
    rows: Number(facts?.num_rows),
  };
}

/**
 * True for times normalised to UTC: those that say so; by the format's LogicalTypes.md the older TIMESTAMP_MILLIS and
 * TIMESTAMP_MICROS, which say nothing; and INT96, as the commonest program that still writes it means it (common practice).
 */
function isInstant(row: AnswerRow): boolean {
  const { type, converted_type: converted, logical_type: logical } = row;
  if (type === 'INT96' || /isAdjustedToUTC=1/.test(String(logical))) return true;
  const isOld = logical === null || logical === undefined || logical === '';
  return isOld && /^TIMESTAMP_/.test(String(converted));
}

function timeKindOf(path: string, column: Column, instants: ReadonlySet<string>): ColumnTime {
  const { name, type } = column;
  if (/^TIMESTAMP WITH TIME ZONE/.test(type) || (/^TIMESTAMP/.test(type) && instants.has(name))) return 'instant';
  if (/^(TIMESTAMP|DATE)/.test(type)) return 'local';
  if (NUMBERS.test(type) && type !== 'BOOLEAN') return 'count';
  if (TEXT.test(type)) return 'text';
  throw refusal(
    { file: path, field: name },
    'times (timestamps, dates, ISO 8601 text, or seconds or milliseconds since 1970)',
    words(type),
    'name the column of times "time", or write them as one of these',
  );
}

/** True for a type whose values are readings. */
export function isOfNumbers(type: string): boolean {
  return NUMBERS.test(type);
}

function checkNumbers(path: string, { name, type }: Column): void {
  if (isOfNumbers(type)) return;
  throw refusal({ file: path, field: name }, 'numbers', words(type), 'write the readings as a column of numbers');
}

/**
 * Plans how to read a file.
 *
 * wanted  column of each channel, in channel order
 * throws  TrainError 'history' naming the column whose type is wrong, what was expected and what it is
 */
export async function planColumns(
  connection: DuckDBConnection,
  path: string,
  wanted: readonly string[],
): Promise<ColumnPlan> {
  const { columns, instants, rows } = await describeColumns(connection, path);
  const names = columns.map(({ name }) => name);
  const folderSignal = /(?:^|[/\\])signal=([^/\\]+)[/\\]/.exec(path)?.[1] ?? null;
  const long = longOf(names, folderSignal);
  const timeAt = long?.time ?? timeColumn(names);
  if (columns.length < 2)
    throw refusal(
      { file: path },
      'a column of times and at least one of readings',
      `${names.map(shown).join(', ') || 'no column'} alone`,
      'check that this is the right file',
    );
  const time = columns[timeAt] as Column;
  const common = { time: timeKindOf(path, time, instants), timeName: time.name, rows };
  if (long !== null) {
    const value = columns[long.value] as Column;
    checkNumbers(path, value);
    const signal = long.signal < 0 ? null : (columns[long.signal] as Column);
    if (signal !== null && !TEXT.test(signal.type))
      throw refusal({ file: path, field: signal.name }, 'names of signals', words(signal.type), 'write them as text');
    const ours = { channels: [], valueNames: [value.name], signalName: signal?.name ?? null };
    const ignored = names.filter((_, at) => at !== timeAt && at !== long.value && at !== long.signal);
    const own = signal === null ? folderSignal : null;
    return { ...common, ...ours, format: 'long Parquet', folderSignal: own, columnsIgnored: ignored };
  }
  const channels = wanted.flatMap((column, c) => (names.includes(column) ? [c] : []));
  const valueNames = channels.map((c) => wanted[c] as string);
  for (const name of valueNames) checkNumbers(path, columns[names.indexOf(name)] as Column);
  const columnsIgnored = names.filter((name, at) => at !== timeAt && !wanted.includes(name));
  const wide = { channels, valueNames, signalName: null, folderSignal: null, columnsIgnored };
  return { ...common, ...wide, format: 'wide Parquet' };
}

/** Columns of a long file, null in a wide one; the signal's is -1 where the folder names it. */
export function longOf(
  names: readonly string[],
  folderSignal: string | null,
): { readonly time: number; readonly signal: number; readonly value: number } | null {
  const found = longColumns(names);
  if (found !== null || folderSignal === null) return found;
  const value = names.findIndex((name) => name.toLowerCase() === 'value');
  const time = timeColumn(names);
  return value >= 0 && value !== time ? { time, signal: -1, value } : null;
}

/** The time column, as numbers (ms, local ones as if they were UTC) or as text. */
function timeExpression({ time, timeName }: ColumnPlan): string {
  const column = named(timeName);
  if (time === 'text') return `CAST(${column} AS VARCHAR)`;
  // Microseconds are whole and exact in a double until the year 2255; halves of a millisecond round up, as in text.
  const ms = `floor(CAST(epoch_us(CAST(${column} AS TIMESTAMP)) AS DOUBLE) / 1000 + 0.5)`;
  const instant = `floor(CAST(epoch_us(${column}) AS DOUBLE) / 1000 + 0.5)`;
  const number = time === 'count' ? `CAST(${column} AS DOUBLE)` : time === 'local' ? ms : instant;
  return `coalesce(${number}, 'nan'::DOUBLE)`;
}

/** The number of the channel a row belongs to; -1 where it names none of the site's, -2 where it names nothing. */
function channelExpression({ signalName, folderSignal }: ColumnPlan, wanted: readonly string[]): string {
  const list = `[${wanted.map(quoted).join(', ')}]`;
  if (signalName === null)
    return `CAST(coalesce(list_position(${list}, ${quoted(folderSignal ?? '')}), 0) - 1 AS DOUBLE)`;
  const name = `CAST(${named(signalName)} AS VARCHAR)`;
  return `CAST(CASE WHEN ${name} IS NULL OR ${name} = '' THEN -2 ELSE coalesce(list_position(${list}, ${name}), 0) - 1 END AS DOUBLE)`;
}

/**
 * The question for the rows from `fromRow` on: time, then values; in a long file time, channel, value.
 *
 * isSorted  in order of time, rows of equal times as in the file
 */
export function rowsQuestion(
  plan: ColumnPlan,
  path: string,
  wanted: readonly string[],
  fromRow: number,
  isSorted: boolean,
): string {
  const values = plan.valueNames.map((name) => `coalesce(CAST(${named(name)} AS DOUBLE), 'nan'::DOUBLE)`);
  const channel = plan.format === 'long Parquet' ? [channelExpression(plan, wanted)] : [];
  const source = `read_parquet(${quotedPath(path)}, hive_partitioning = false, file_row_number = true)`;
  const columns = [timeExpression(plan), ...channel, ...values].join(', ');
  if (isSorted)
    return `SELECT ${columns} FROM ${source} ORDER BY ${named(plan.timeName)}, file_row_number OFFSET ${fromRow}`;
  return `SELECT ${columns} FROM ${source}${fromRow > 0 ? ` WHERE file_row_number >= ${fromRow}` : ''}`;
}
