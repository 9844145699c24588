/** Which signals a columnar file holds: its columns of numbers, or the names in a long one. */
import { describeColumns, isOfNumbers, longOf } from './column-plan.ts';
import { ask, type ColumnsEngine, named, quotedPath } from './columns-engine.ts';
import { timeColumn } from './csv-header.ts';

/** More names of signals than any site has. */
const MOST_NAMES = 10_000;

/** Names by whether they are numbers or text, in the order of the file. */
export async function discoverColumns(path: string, engine: ColumnsEngine): Promise<Map<string, 'number' | 'text'>> {
  const connection = await engine.connect();
  const { columns } = await describeColumns(connection, path);
  const names = columns.map(({ name }) => name);
  const folderSignal = /(?:^|[/\\])signal=([^/\\]+)[/\\]/.exec(path)?.[1] ?? null;
  const long = longOf(names, folderSignal);
  const kindOf = (at: number): 'number' | 'text' => (isOfNumbers(columns[at]?.type ?? '') ? 'number' : 'text');
  if (long === null) {
    const time = timeColumn(names);
    return new Map(names.flatMap((name, at) => (at === time ? [] : [[name, kindOf(at)] as const])));
  }
  if (long.signal < 0) return new Map([[folderSignal as string, kindOf(long.value)]]);
  const signal = `CAST(${named(names[long.signal] as string)} AS VARCHAR)`;
  const question = `SELECT ${signal} AS name, min(file_row_number) AS first FROM read_parquet(${quotedPath(path)}, hive_partitioning = false, file_row_number = true) WHERE ${signal} <> '' GROUP BY 1 ORDER BY 2 LIMIT ${MOST_NAMES}`;
  const found = await ask(connection, path, question);
  return new Map(found.map((row) => [String(row.name), kindOf(long.value)] as const));
}
