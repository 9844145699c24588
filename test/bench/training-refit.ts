/**
 * Refit with what is new alone: one month of one-minute ticks from a desk's archive, onto the factors of one month and onto those of
 * twenty years, by the real command. What it costs must not depend on how long the history was.
 */
import { join } from 'node:path';
import { type BenchOptions, type Row, row } from './harness.ts';
import { makeArchive } from './training-desk.ts';
import { writePlant } from './training-files.ts';
import { SIGNAL_COUNT } from './training-plant.ts';
import { measure, median, type Ran, STILLWELL } from './training-process.ts';
import { fitAndSeal, inWorkshop, stepsOf, type Workshop } from './training-runs.ts';

const MONTH = 30 * 1440;
const YEARS = 20;
const TWENTY_YEARS = Math.round(YEARS * 365.25 * 1440);
const REPEATS = 3;
const BARS = { seconds: 3, ratio: 1.1 };

/** A site that has been fitted, and whose gateway has sent a month since. */
interface Served {
  readonly name: string;
  readonly command: readonly string[];
}

/** Rows of the group. */
export function refitRows(options: BenchOptions): AsyncIterable<Row> {
  return inWorkshop(options, async function* (workshop) {
    const short = await served(options, workshop, 'a month', MONTH);
    const long = await served(options, workshop, `${YEARS} years`, TWENTY_YEARS);
    const runs: { readonly short: Ran; readonly long: Ran }[] = [];
    for (let k = 0; k < REPEATS; k++)
      runs.push({ short: await measure(short.command), long: await measure(long.command) });
    const seconds = (which: 'short' | 'long'): number => median(runs.map((run) => run[which].seconds));
    for (const which of ['short', 'long'] as const) {
      yield row({
        suite: 'training',
        case: `refit: one new month x ${SIGNAL_COUNT} onto ${(which === 'short' ? short : long).name}`,
        unit: 's',
        ours: seconds(which),
        better: 'lower',
        bar: BARS.seconds,
      });
    }
    yield row({
      suite: 'training',
      case: `refit: onto ${YEARS} years over onto a month`,
      unit: 'ratio',
      ours: seconds('long') / seconds('short'),
      better: 'lower',
      bar: BARS.ratio,
    });
    const peaks = (which: 'short' | 'long'): string => median(runs.map((run) => run[which].peakMb)).toFixed(0);
    options.note(`refit: peak memory ${peaks('short')} MB onto ${short.name}, ${peaks('long')} MB onto ${long.name}`);
  });
}

/** Fits `ticks` ticks, seals, and lets the bundle's gateway send the month after them. */
async function served({ note }: BenchOptions, workshop: Workshop, name: string, ticks: number): Promise<Served> {
  const folder = (what: string): string => join(workshop.folder, `${what}-${ticks}`);
  const parquet = `${folder('history')}.parquet`;
  await writePlant({ parquet, array: null }, ticks);
  const first = await fitAndSeal(workshop, [parquet], `fit-${ticks}`);
  note(`fit of ${name}, ${stepsOf(first)}`);
  await makeArchive(folder('desk'), first.bundle, ticks, MONTH);
  const words = ['--archive', folder('desk'), '--site', workshop.site, '--previous', first.bundle];
  const factors = join(first.out, 'factors.swf');
  const command = [STILLWELL, 'refit', ...words, '--factors', factors, '--out', folder('refit'), '--json'];
  return { name, command };
}
