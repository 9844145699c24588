/**
 * Suite `accuracy`: how good what is learned is, with the defaults of a fit: on the published split of a measured series, beside a
 * known optimum, and on open data sets beside reference libraries.
 */
import { knownRows } from './accuracy-known.ts';
import { openRows } from './accuracy-open.ts';
import { planRows } from './accuracy-plans.ts';
import { splitRows } from './accuracy-split.ts';
import { type BenchOptions, isWanted, type Row } from './harness.ts';
import { warningRows } from './warning-rows.ts';
import { wetWellRows } from './wet-well.ts';

/** Rows of the suite. */
export async function* rows(options: BenchOptions): AsyncIterable<Row> {
  yield* splitRows(options);
  yield* knownRows(options);
  yield* planRows(options);
  yield* openRows(options);
  if (isWanted(options, 'wet well')) yield* wetWellRows(options);
  if (options.only !== null) yield* warningRows(options);
}
