/** Suite `gateway`: what running a site costs. */
import { decodeRows } from './decode.ts';
import { filterRows } from './filter-step.ts';
import { processRows } from './gateway-process.ts';
import type { BenchOptions, Row } from './harness.ts';

/** Rows of the suite. */
export async function* rows(options: BenchOptions): AsyncIterable<Row> {
  yield* filterRows(options);
  yield* decodeRows(options);
  yield* processRows(options);
}
