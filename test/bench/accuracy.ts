/**
 * Suite `accuracy`: how good what is learned is, with the defaults of a fit: on the published split of a measured series, beside a
 * known optimum, and on open data sets beside reference libraries.
 */
import { existsSync } from 'node:fs';
import { knownRows } from './accuracy-known.ts';
import { openRows } from './accuracy-open.ts';
import { planRows } from './accuracy-plans.ts';
import { splitRows } from './accuracy-split.ts';
import { type BenchOptions, isWanted, type Row } from './harness.ts';

/** The plant of switched pumps, a suite of rows in a file of its own. */
const WET_WELL = new URL('./wet-well.js', import.meta.url);

/** Rows of the suite. */
export async function* rows(options: BenchOptions): AsyncIterable<Row> {
  yield* splitRows(options);
  yield* knownRows(options);
  yield* planRows(options);
  yield* openRows(options);
  if (!isWanted(options, 'wet well')) return;
  if (existsSync(WET_WELL)) yield* ((await import(WET_WELL.href)) as WetWell).wetWellRows(options);
  else options.note('wet well: no rows yet');
}

interface WetWell {
  wetWellRows(options: BenchOptions): AsyncIterable<Row>;
}
