/** `stillwell size`: what a fit will take, before anything runs. */
import { Command } from 'commander';
import { TrainError } from '../errors.ts';
import { hasSimd } from '../kernels/load.ts';
import { several, share, wholeNumber } from '../option-values.ts';
import { FIT_DEFAULTS } from '../pipeline.ts';
import { readSite } from '../site-file.ts';
import { condenseSize, readFrames } from '../sizing/frames-size.ts';
import { historyExtent } from '../sizing/history-extent.ts';
import { predictFit } from '../sizing/predict-fit.ts';
import { probeSeconds } from '../sizing/probe.ts';
import { fitText, framesText, kernelText } from '../sizing/size-text.ts';
import { timeSpan } from '../time-option.ts';

interface SizeOptions {
  readonly site?: string;
  readonly history?: string[];
  readonly frames?: string;
  readonly window?: number;
  readonly timeZone?: string;
  readonly from?: string;
  readonly until?: string;
  readonly learnShare: number;
  readonly maxBytes: number;
  readonly json: boolean;
}

/** The command, to be joined to the program. */
export function sizeCommand(): Command {
  return new Command('size')
    .description(
      'Says what a fit will take, before anything runs: ticks, memory, time, bundle; no history is read through.',
    )
    .option('--site <file>', 'site file')
    .option('--history <files...>', 'files, folders and patterns, as for fit', several)
    .option('--frames <shape>', 'wide observations: count/length/window, or a .npy or Parquet file')
    .option('--window <frames>', 'with a file: frames in a window, 1 when absent', wholeNumber(1))
    .option('--time-zone <zone>', "zone of history times that carry none; the site's otherwise")
    .option('--from <time>', 'leave out readings before this time')
    .option('--until <time>', 'leave out readings from this time on')
    .option('--learn-share <share>', 'share of the history to learn from', share, FIT_DEFAULTS.learnShare)
    .option('--max-bytes <bytes>', 'largest bundle document', wholeNumber(2048, 65_536), FIT_DEFAULTS.maxBytes)
    .option('--json', 'the same as JSON', false)
    .addHelpText(
      'after',
      '\nExamples:\n  stillwell size --site site.yaml --history logs/2023.csv logs/2024.csv\n' +
        '  stillwell size --frames 90000/76800/50    an hour of a 320 x 240 camera at 25 frames a second',
    )
    .action(run);
}

async function run(options: SizeOptions): Promise<void> {
  const { site, history, frames } = options;
  if (frames === undefined && (site === undefined || history === undefined)) {
    throw new TrainError(
      'options',
      `size: expected --site and --history, or --frames, got ${site === undefined ? (history === undefined ? 'none of them' : '--history alone') : '--site alone'}; add --help for an example`,
    );
  }
  if ((site === undefined) !== (history === undefined))
    throw new TrainError('options', `size: expected --site and --history together, got one of them; give the other`);
  if (options.window !== undefined && frames === undefined)
    throw new TrainError('options', '--window: expected --frames beside it, got none; give the recording');
  const freeBytes = process.availableMemory();
  const isSimd = hasSimd();
  const fit = site === undefined || history === undefined ? null : await sizeFit(site, history, options);
  const wide = frames === undefined ? null : await readFrames(frames, options.window);
  const condense = wide === null ? null : await condenseSize(wide);
  if (options.json) {
    const all = {
      ...(fit === null ? {} : fit),
      ...(wide === null ? {} : { frames: wide, condense }),
      free_bytes: freeBytes,
      has_simd: isSimd,
    };
    process.stdout.write(`${JSON.stringify(all, null, 2)}\n`);
    return;
  }
  const parts = [
    ...(fit === null ? [] : [fitText(fit.site, fit.history, fit.fit, freeBytes)]),
    ...(wide === null || condense === null ? [] : [framesText(wide, condense, freeBytes)]),
    kernelText(isSimd),
  ];
  process.stdout.write(parts.join('\n'));
}

async function sizeFit(siteFile: string, paths: readonly string[], options: SizeOptions) {
  const site = readSite(siteFile);
  const span = timeSpan(options, site.timeZone);
  const history = await historyExtent(paths, site, options.timeZone ?? site.timeZone, span);
  if (history.ticks === 0)
    throw new TrainError(
      'history',
      'history: expected readings of the site in the time asked for, saw none at the beginning or end of any file; check --from, --until and the columns',
    );
  const probe = probeSeconds();
  const { learnShare, maxBytes } = options;
  return {
    site: site.site,
    history,
    fit: predictFit(site, history, { learnShare, maxBytes, probe }),
    probe_seconds: probe,
  };
}
