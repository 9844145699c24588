/** `stillwell refit`: a new candidate from what the desk collected. */
import { join } from 'node:path';
import { ADVISORY, type Site } from '@stillwell/protocol';
import { Command } from 'commander';
import { openProvenFile } from '../bundle-file.ts';
import { CANDIDATE_FILES, candidateFacts, candidateFiles, writtenText } from '../candidate-files.ts';
import { TrainError } from '../errors.ts';
import type { Factors } from '../factors/factors.ts';
import { FACTORS_FILE } from '../factors/keeper.ts';
import type { FitOptions } from '../fit-options.ts';
import { fitSummary } from '../fit-summary.ts';
import type { History } from '../history/history.ts';
import { halfLifeOption, halfLifeTicks, kindOption, reason, several, share, wholeNumber } from '../option-values.ts';
import { withRoom, writeOutputs } from '../output-file.ts';
import { createProgress } from '../progress.ts';
import type { RefitResult } from '../refit/refit.ts';
import { readSite } from '../site-file.ts';
import { surveyNotes } from '../survey-notes.ts';
import { shortNumber, textTable } from '../text-table.ts';
import { type TimeSpan, timeSpan } from '../time-option.ts';

interface RefitCommandOptions {
  readonly archive: string;
  readonly site: string;
  readonly history?: string[];
  readonly factors?: string[];
  readonly previous?: string;
  readonly out: string;
  readonly timeZone?: string;
  readonly from?: string;
  readonly until?: string;
  readonly learnShare?: number;
  readonly calibrateShare?: number;
  readonly halfLife?: number;
  readonly maxBytes: number;
  readonly useAll: boolean;
  readonly kind: FitOptions['kind'];
  readonly seed: number;
  readonly threads?: 1 | 2;
  readonly override?: string;
  readonly json: boolean;
}

/** The command, to be joined to the program. */
export function refitCommand(): Command {
  return new Command('refit')
    .description('Learns a new candidate from the archive of a desk, and says whether it beats the bundle that serves.')
    .requiredOption('--archive <dir>', 'data folder of the desk')
    .requiredOption('--site <file>', 'site file')
    .requiredOption('--out <folder>', `folder for ${CANDIDATE_FILES}`)
    .option('--history <files...>', 'files of the first fit as well; the archive wins where both cover a tick', several)
    .option(
      '--factors <files...>',
      'factors.swf of the last fit or refit, in place of history files: only newer segments are read; several of spans that follow each other are joined',
      several,
    )
    .option('--previous <bundle>', 'bundle that serves: compared with, and named in the new one as its predecessor')
    .option('--time-zone <zone>', "zone of history times that carry none; the site's otherwise")
    .option('--from <time>', 'leave out readings before this time')
    .option('--until <time>', 'leave out readings from this time on')
    .option('--learn-share <share>', 'share to learn from; by default the newest readings calibrate and judge', share)
    .option('--calibrate-share <share>', 'share after it for penalties and bounds', share)
    .addOption(halfLifeOption())
    .option('--max-bytes <bytes>', 'largest bundle document', wholeNumber(2048, 65_536), 24 * 1024)
    .option('--no-use-all', 'ship the model as judged instead of learning once more from everything')
    .addOption(kindOption())
    .option('--seed <number>', 'seed of everything drawn', wholeNumber(0, 2 ** 32 - 1), 1)
    .option('--threads <count>', 'threads, 1 or 2; as many as there are cores', wholeNumber(1, 2))
    .option('--override <reason>', 'why it may be sealed though it shows no skill; stands in the bundle', reason)
    .option('--json', 'the result as JSON', false)
    .addHelpText(
      'after',
      '\nExample:\n  stillwell refit --archive desk-data --site site.yaml --factors fits/factors.swf --previous pump-7.swb --out refit',
    )
    .action(run);
}

async function run(options: RefitCommandOptions): Promise<void> {
  await withRoom(options.out, () => refitInto(options));
}

async function refitInto(options: RefitCommandOptions): Promise<void> {
  const site = readSite(options.site);
  const previous = options.previous === undefined ? null : openProvenFile(options.previous);
  const span = timeSpan(options, site.timeZone);
  const { fromMs, untilMs } = span;
  const { halfLife, threads, out } = options;
  const [{ readArchive }, { refit }] = await Promise.all([import('../desk/archive.ts'), import('../refit/refit.ts')]);
  const factors = await factorsOf(options, site);
  const archive = await readArchive(options.archive, site.site, factors?.toTick);
  const files = await readFiles(site, options, span);
  const progress = createProgress('refitting', 'steps');
  let steps = 0;
  const result = await refit(
    {
      archive,
      files,
      factors,
      halfLifeTicks: halfLifeTicks(halfLife, site),
      site,
      previous,
      ...(fromMs === undefined ? {} : { fromTick: Math.ceil(fromMs / site.tickMs) }),
      ...(untilMs === undefined ? {} : { toTick: Math.ceil(untilMs / site.tickMs) }),
      ...(threads === undefined ? {} : { threads }),
    },
    {
      seed: options.seed,
      learnShare: options.learnShare ?? null,
      calibrateShare: options.calibrateShare ?? null,
      maxBytes: options.maxBytes,
      coverage: previous?.bundle.bounds.coverage ?? 0.9,
      useAll: options.useAll,
      kind: options.kind,
      override: options.override ?? null,
      progress: () => progress.update(++steps, null),
    },
    (absorbed, fit) => candidateFiles(out, site, absorbed.survey, fit),
  );
  progress.end();
  const { factors: bytes, files: candidate } = result;
  const written = [...candidate, ...(bytes === null ? [] : [{ path: join(out, FACTORS_FILE), bytes }])];
  writeOutputs(written);
  process.stdout.write(
    options.json
      ? `${JSON.stringify(resultJson(options.out, result), null, 2)}\n`
      : `${text(result)}\n${writtenText(options.out, written)}\n${ADVISORY}\n`,
  );
}

/** What was learned before, if it is of this site. */
async function factorsOf(
  { factors: paths, history, halfLife }: RefitCommandOptions,
  site: Site,
): Promise<Factors | null> {
  if (paths === undefined) return null;
  for (const [option, given] of [
    ['--history', history],
    ['--half-life', halfLife],
  ] as const) {
    if (given === undefined) continue;
    const why =
      option === '--history' ? 'the factors hold what those files taught' : 'factors keep the one they were made with';
    throw new TrainError(
      'options',
      `${option}: expected no --factors beside it, got both: ${why}; leave one of them out`,
    );
  }
  const { checkBelongs, readFactors } = await import('../factors/file.ts');
  const { joinFactors } = await import('../factors/merge.ts');
  const spans = paths.map((path) => {
    const factors = readFactors(path);
    checkBelongs(factors, site, path);
    return factors;
  });
  return joinFactors(spans);
}

async function readFiles(site: Site, options: RefitCommandOptions, span: TimeSpan): Promise<History | null> {
  if (options.history === undefined) return null;
  const { readHistory } = await import('../history/read.ts');
  const progress = createProgress('reading');
  try {
    return await readHistory(options.history, site, { zone: options.timeZone ?? null, ...span, progress });
  } finally {
    progress.end();
  }
}

function resultJson(folder: string, { fit, comparison, absorbed }: RefitResult): Record<string, unknown> {
  const { series, newFromTick } = absorbed;
  return {
    ...candidateFacts(folder, fit),
    survey_notes: surveyNotes(absorbed.survey),
    ticks: series.ticks,
    new_ticks: series.firstTick + series.ticks - newFromTick,
    comparison,
  };
}

function text({ fit, comparison, absorbed }: RefitResult): string {
  const survey = surveyNotes(absorbed.survey)
    .map((note) => `Survey: ${note}\n`)
    .join('');
  const beside =
    comparison === null
      ? 'No previous bundle given (--previous), so nothing to compare with.'
      : [
          textTable(
            ['signal', 'mse new / previous', 'coverage', 'previous coverage'],
            comparison.signals.map((one) => [
              one.signal,
              shortNumber(one.ratio, 3),
              shortNumber(one.coverage, 3),
              shortNumber(one.previousCoverage, 3),
            ]),
            [1, 2, 3],
          ),
          comparison.sentence,
        ].join('\n');
  return `${fitSummary(fit)}${survey}\n${beside}\n`;
}
