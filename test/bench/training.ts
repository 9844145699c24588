/**
 * Suite `training`: what learning costs, in time and memory. The plain suite ends within about a quarter of an hour on two cores;
 * longer groups run when they are asked for by name.
 */

import { factorsRows } from './factors-rows.ts';
import { type BenchOptions, isWanted, type Row } from './harness.ts';
import { kernelRows } from './kernels.ts';
import { sizeRows } from './size-rows.ts';
import { growthRows } from './training-growth.ts';
import { historyRows } from './training-history.ts';
import { refitRows } from './training-refit.ts';
import { featureRows, projectionRows, wideCameraRows, wideWindowRows } from './wide-features-rows.ts';
import { wideSvdRows } from './wide-svd-rows.ts';

interface Group {
  /** The rows' names begin with it. */
  readonly name: string;
  /** Minutes, where it runs only by name. */
  readonly long?: number;
  readonly rows: (options: BenchOptions) => AsyncIterable<Row>;
}

const GROUPS: readonly Group[] = [
  { name: 'history', rows: historyRows },
  { name: 'growth', rows: growthRows },
  { name: 'refit', rows: refitRows },
  { name: 'size', rows: sizeRows },
  { name: 'factors', rows: factorsRows },
  { name: 'kernels', rows: kernelRows },
  { name: 'incremental SVD', rows: wideSvdRows },
  { name: 'features', rows: featureRows },
  { name: 'projection', rows: projectionRows },
  { name: 'wide windows', long: 12, rows: wideWindowRows },
  { name: 'wide camera', long: 6, rows: wideCameraRows },
];

/** Rows of the suite. */
export async function* rows(options: BenchOptions): AsyncIterable<Row> {
  for (const group of GROUPS) {
    const isAsked = options.only !== null && isWanted(options, group.name);
    if (isAsked || (options.only === null && group.long === undefined)) yield* group.rows(options);
  }
  const left = GROUPS.filter(({ long }) => long !== undefined && options.only === null);
  if (left.length === 0) return;
  const names = left.map(({ name, long }) => `${name} (about ${long} min)`).join(', ');
  options.note(
    `left out, being long: ${names}; run each by name, as in npm run bench -- training --case ${left[0]!.name}`,
  );
}
