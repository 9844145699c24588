/** `stillwell fit`: from a history to a judged candidate. */
import { join } from 'node:path';
import { ADVISORY, type Site } from '@stillwell/protocol';
import { Command } from 'commander';
import { CANDIDATE_FILES, candidateFacts, writtenText } from '../candidate-files.ts';
import { TrainError } from '../errors.ts';
import { type FitSiteJob, type FitSiteWatch, fitSite } from '../fit-site.ts';
import { fitSummary } from '../fit-summary.ts';
import { halfLifeOption, halfLifeTicks, kindOption, reason, several, share, wholeNumber } from '../option-values.ts';
import { withRoom, writeOutputs } from '../output-file.ts';
import { FIT_DEFAULTS, type FitOptions } from '../pipeline.ts';
import { createProgress, type Progress } from '../progress.ts';
import { readSite } from '../site-file.ts';
import { surveyNotes } from '../survey-notes.ts';
import { timeSpan } from '../time-option.ts';

interface FitCommandOptions {
  readonly site?: string;
  readonly history?: string[];
  readonly fleet?: string;
  readonly threads?: number;
  readonly fresh: boolean;
  readonly out: string;
  readonly timeZone?: string;
  readonly from?: string;
  readonly until?: string;
  readonly learnShare: number;
  readonly calibrateShare: number;
  readonly halfLife?: number;
  readonly maxBytes: number;
  readonly useAll: boolean;
  readonly kind: FitOptions['kind'];
  readonly seed: number;
  readonly override?: string;
  readonly json: boolean;
}

/** Beside the candidate while a long history is read. */
const RESUME_FILE = 'unfinished.swr';

/** What of the options a site's job needs. */
type JobOptions = Omit<FitCommandOptions, 'site' | 'history' | 'fleet' | 'threads' | 'fresh' | 'out' | 'json'>;

/** The command, to be joined to the program. */
export function fitCommand(): Command {
  return new Command('fit')
    .description(
      'Learns a model of a site from its history and judges it on the part it never saw; or of many sites at once.',
    )
    .option('--site <file>', 'site file')
    .option(
      '--history <files...>',
      'CSV, NDJSON or Parquet files, text also as .gz or .zst; folders and patterns too',
      several,
    )
    .option('--fleet <path>', 'instead of both: a fleet file, or a folder with one sub-folder a site')
    .option(
      '--threads <count>',
      'threads of a site, 1 or 2; with --fleet sites fitted at the same time; as many as cores and memory allow',
      wholeNumber(1, 256),
    )
    .option('--fresh', 'with --fleet: fit sites again whose inputs and options are unchanged', false)
    .requiredOption('--out <folder>', `folder for ${CANDIDATE_FILES}`)
    .option('--time-zone <zone>', "zone of history times that carry none; the site's otherwise")
    .option('--from <time>', 'leave out readings before this time')
    .option('--until <time>', 'leave out readings from this time on')
    .option('--learn-share <share>', 'share of the history to learn from', share, FIT_DEFAULTS.learnShare)
    .option('--calibrate-share <share>', 'share after it for penalties and bounds', share, FIT_DEFAULTS.calibrateShare)
    .addOption(halfLifeOption())
    .option('--max-bytes <bytes>', 'largest bundle document', wholeNumber(2048, 65_536), FIT_DEFAULTS.maxBytes)
    .option('--use-all', 'after judging, learn once more from the whole history', false)
    .addOption(kindOption())
    .option('--seed <number>', 'seed of everything drawn', wholeNumber(0, 2 ** 32 - 1), FIT_DEFAULTS.seed)
    .option('--override <reason>', 'why it may be sealed though it shows no skill; stands in the bundle', reason)
    .option('--json', 'the result as JSON', false)
    .addHelpText(
      'after',
      '\nExamples:\n  stillwell fit --site site.yaml --history logs/2023.csv logs/2024.csv --out fits/north-well\n' +
        '  stillwell fit --fleet sites --out fits\n\nWith --fleet: exit code 3 where some sites failed and the others were fitted; 130 after Ctrl-C, after which the same\n' +
        'command goes on with what is left.',
    )
    .action(run);
}

async function run(options: FitCommandOptions): Promise<void> {
  if (options.fleet !== undefined) return runFleet(options, options.fleet);
  const { site: siteFile, history } = options;
  if (siteFile === undefined || history === undefined) {
    const [missing, got] = siteFile === undefined ? ['--site', '--history'] : ['--history', '--site'];
    const had = siteFile === undefined && history === undefined ? 'none of them' : `${got} alone, without ${missing}`;
    throw new TrainError(
      'options',
      `fit: expected --site and --history, or --fleet, got ${had}; add --help for an example`,
    );
  }
  if (options.fresh)
    throw new TrainError('options', '--fresh: expected --fleet beside it, got a single site; leave it out');
  const threads = threadsOfOne(options.threads);
  const site = readSite(siteFile);
  const resumeFile = join(options.out, RESUME_FILE);
  const say = (sentence: string): void => void process.stderr.write(`${sentence}\n`);
  const job = { ...jobOf(site, history, options.out, options), resumeFile, say, ...threads };
  const { loaded, result, files, notes } = await withRoom(options.out, async () => {
    const fitted = await fitSite(job, stepsShown());
    writeOutputs(fitted.files);
    return fitted;
  });
  loaded.done();
  process.stdout.write(
    options.json
      ? `${JSON.stringify({ ...candidateFacts(options.out, result), notes, survey_notes: surveyNotes(loaded.survey) }, null, 2)}\n`
      : `${fitSummary(result)}${noted('Note', notes)}${noted('Survey', surveyNotes(loaded.survey))}\n` +
          `${writtenText(options.out, files)}\n${ADVISORY}\n`,
  );
}

/** Of a single site; absent where nothing was asked for. */
function threadsOfOne(threads: number | undefined): Pick<FitSiteJob, 'threads'> {
  if (threads === undefined || threads === 1 || threads === 2) return threads === undefined ? {} : { threads };
  throw new TrainError('options', `--threads: expected 1 or 2 for a single site, got ${threads}; more are for --fleet`);
}

async function runFleet(options: FitCommandOptions, fleet: string): Promise<void> {
  for (const option of ['site', 'history'] as const) {
    if (options[option] !== undefined)
      throw new TrainError('options', `--${option}: expected no --fleet beside it, got both; leave one of them out`);
  }
  if (options.override !== undefined)
    throw new TrainError(
      'options',
      '--override: expected one site that it is the reason for, got --fleet; write override into the entry of that site in a fleet file',
    );
  const { out, fresh, json, threads = null } = options;
  const { fitFleet } = await import('./fit-fleet.ts');
  await fitFleet({
    fleet,
    out,
    threads,
    fresh,
    json,
    jobOf: (site, history, folder, entry) => jobOf(site, history, folder, { ...options, ...entry }),
  });
}

function jobOf(site: Site, history: readonly string[], out: string, options: JobOptions): FitSiteJob {
  return {
    site,
    history,
    out,
    zone: options.timeZone ?? null,
    span: timeSpan(options, site.timeZone),
    halfLifeTicks: halfLifeTicks(options.halfLife, site),
    options: {
      seed: options.seed,
      learnShare: options.learnShare,
      calibrateShare: options.calibrateShare,
      maxBytes: options.maxBytes,
      coverage: FIT_DEFAULTS.coverage,
      useAll: options.useAll,
      kind: options.kind,
      override: options.override ?? null,
    },
  };
}

/** Progress lines for a terminal: rows while reading, steps while fitting. */
function stepsShown(): FitSiteWatch {
  let steps = 0;
  let fitting: Progress | null = null;
  return {
    reading: createProgress('reading'),
    step: () => {
      fitting ??= createProgress('fitting', 'steps');
      fitting.update(++steps, null);
    },
    end: () => fitting?.end(),
  };
}

function noted(label: string, sentences: readonly string[]): string {
  return sentences.map((sentence) => `${label}: ${sentence}\n`).join('');
}
