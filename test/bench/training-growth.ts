/** How time and memory of a fit grow with its history, from a hundred thousand rows to ten million. */
import { rmSync } from 'node:fs';
import { join } from 'node:path';
import { type BenchOptions, type Row, row } from './harness.ts';
import { writePlant } from './training-files.ts';
import { growthExponent, median } from './training-process.ts';
import { fitAndSeal, inWorkshop, type Sealed, stepsOf, type Workshop } from './training-runs.ts';

/** Rows, and how often each is fitted. */
const LENGTHS = [
  [100_000, 3],
  [300_000, 3],
  [1_000_000, 3],
  [10_000_000, 1],
] as const;
const BARS = { memory: 1.1, exponent: 1.05 };

interface Grown {
  readonly rows: number;
  readonly seconds: number;
  readonly peakMb: number;
}

/** Rows of the group. */
export function growthRows(options: BenchOptions): AsyncIterable<Row> {
  return inWorkshop(options, async function* (workshop) {
    const grown: Grown[] = [];
    for (const [rows, repeats] of LENGTHS) {
      const one = await fitted(options, workshop, rows, repeats);
      grown.push(one);
      yield row({
        suite: 'training',
        case: `growth: ${rows.toLocaleString('en')} x 8, Parquet to bundle`,
        unit: 's',
        ours: one.seconds,
        better: 'lower',
      });
    }
    const [before, after] = grown.slice(-2);
    // What does not depend on the length hides behind a low exponent, so what each further row costs is told beside it.
    yield row({
      suite: 'training',
      case: 'growth: each further million rows',
      unit: 's',
      ours: (1e6 * (after!.seconds - before!.seconds)) / (after!.rows - before!.rows),
      better: 'lower',
    });
    yield row({
      suite: 'training',
      case: 'growth: memory at ten times the rows',
      unit: 'ratio',
      ours: after!.peakMb / before!.peakMb,
      better: 'lower',
      bar: BARS.memory,
    });
    yield row({
      suite: 'training',
      case: 'growth: time against rows, 10^5 to 10^7',
      unit: 'exponent',
      ours: growthExponent(grown.map(({ rows, seconds }) => [rows, seconds] as const)),
      better: 'lower',
      bar: BARS.exponent,
    });
  });
}

async function fitted({ note }: BenchOptions, workshop: Workshop, rows: number, repeats: number): Promise<Grown> {
  const parquet = join(workshop.folder, 'rows.parquet');
  await writePlant({ parquet, array: null }, rows);
  const runs: Sealed[] = [];
  for (let k = 0; k < repeats; k++) runs.push(await fitAndSeal(workshop, [parquet], 'rows'));
  rmSync(parquet);
  note(`${rows.toLocaleString('en')} rows, ${stepsOf(runs[runs.length - 1]!)}`);
  return { rows, seconds: median(runs.map((run) => run.seconds)), peakMb: median(runs.map((run) => run.peakMb)) };
}
