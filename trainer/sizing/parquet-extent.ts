/** What a Parquet file says of itself: its rows, and the first and last of its times. Of the readings none is read. */
import { parseInstant, type Site } from '@stillwell/protocol';
import { channelsOf } from '../history/channels.ts';
import { type ColumnPlan, planColumns } from '../history/column-plan.ts';
import { ask, ColumnsEngine, named, quotedPath } from '../history/columns-engine.ts';
import type { InputFile } from '../history/input-file.ts';
import { type Resolved, ZoneRules } from '../history/zone.ts';
import type { FileExtent } from './history-extent.ts';

/** Counts since 1970 from here on are milliseconds: as seconds they would lie past the year 5138. */
const FIRST_EPOCH_MS = 1e11;

/**
 * Looks at a file's footer and its column of times.
 *
 * zone    of times that carry none; null: UTC
 * throws  TrainError 'history' where it is no Parquet file, or its columns are not what the site asks for
 */
export async function parquetExtent({ path }: InputFile, site: Site, zone: string | null): Promise<FileExtent> {
  const engine = new ColumnsEngine();
  try {
    const connection = await engine.connect();
    const channels = channelsOf(site).map(({ column }) => column);
    const plan = await planColumns(connection, path, channels);
    const time = named(plan.timeName);
    const end =
      plan.time === 'instant' || plan.time === 'local' ? (one: string) => `epoch_ms(${one}::TIMESTAMP)` : String;
    const [found] = await ask(
      connection,
      path,
      `SELECT ${end(`min(${time})`)} AS first, ${end(`max(${time})`)} AS last FROM read_parquet(${quotedPath(path)}, hive_partitioning = false)`,
    );
    const place = (value: unknown): number => placeOf(value, plan, zone);
    return {
      textBytes: 0,
      rows: plan.rows,
      // A long table has one reading a row.
      readings: plan.rows * Math.max(1, plan.channels.length),
      fromMs: found?.first === null ? Number.POSITIVE_INFINITY : place(found?.first),
      toMs: found?.last === null ? Number.NEGATIVE_INFINITY : place(found?.last),
      isExact: true,
    };
  } finally {
    engine.close();
  }
}

/** A time as the file has it, in ms since 1970 UTC. */
function placeOf(value: unknown, { time }: ColumnPlan, zone: string | null): number {
  if (time === 'text') {
    const text = String(value);
    const instant = parseInstant(text.replace(' ', 'T'));
    return instant ?? inZone(Date.parse(`${text.replace(' ', 'T')}Z`), zone);
  }
  const count = Number(value);
  if (time === 'count') return count >= FIRST_EPOCH_MS ? count : 1000 * count;
  return time === 'instant' ? count : inZone(count, zone);
}

function inZone(localMs: number, zone: string | null): number {
  if (zone === null) return localMs;
  const out: Resolved = { utcMs: 0, kind: 'plain', changeMs: 0 };
  new ZoneRules(zone).resolve(localMs, Number.NEGATIVE_INFINITY, false, out);
  return out.utcMs;
}
