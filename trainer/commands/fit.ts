/** `stillwell fit`: from a history to a judged candidate. */
import { ADVISORY, type Site } from '@stillwell/protocol';
import { Command } from 'commander';
import { CANDIDATE_FILES, candidateFacts } from '../candidate-files.ts';
import { type FitSiteJob, type FitSiteWatch, fitSite } from '../fit-site.ts';
import { fitSummary } from '../fit-summary.ts';
import { kindOption, reason, several, share, wholeNumber } from '../option-values.ts';
import { writeOutputs } from '../output-file.ts';
import { FIT_DEFAULTS, type FitOptions, type FitResult } from '../pipeline.ts';
import { createProgress, type Progress } from '../progress.ts';
import { readSite } from '../site-file.ts';
import { surveyNotes } from '../survey-notes.ts';
import { timeSpan } from '../time-option.ts';

interface FitCommandOptions {
  readonly site: string;
  readonly history: string[];
  readonly out: string;
  readonly timeZone?: string;
  readonly from?: string;
  readonly until?: string;
  readonly learnShare: number;
  readonly calibrateShare: number;
  readonly maxBytes: number;
  readonly useAll: boolean;
  readonly kind: FitOptions['kind'];
  readonly seed: number;
  readonly override?: string;
  readonly json: boolean;
}

/** The command, to be joined to the program. */
export function fitCommand(): Command {
  return new Command('fit')
    .description('Learns a model of a site from its history and judges it on the part it never saw.')
    .requiredOption('--site <file>', 'site file')
    .requiredOption('--history <files...>', 'CSV or NDJSON files, also gzipped', several)
    .requiredOption('--out <folder>', 'folder for candidate.swc, report.html, hindcast.json and survey.json')
    .option('--time-zone <zone>', "zone of history times that carry none; the site's otherwise")
    .option('--from <time>', 'leave out readings before this time')
    .option('--until <time>', 'leave out readings from this time on')
    .option('--learn-share <share>', 'share of the history to learn from', share, FIT_DEFAULTS.learnShare)
    .option('--calibrate-share <share>', 'share after it for penalties and bounds', share, FIT_DEFAULTS.calibrateShare)
    .option('--max-bytes <bytes>', 'largest bundle document', wholeNumber(2048, 65_536), FIT_DEFAULTS.maxBytes)
    .option('--use-all', 'after judging, learn once more from the whole history', false)
    .addOption(kindOption())
    .option('--seed <number>', 'seed of everything drawn', wholeNumber(0, 2 ** 32 - 1), FIT_DEFAULTS.seed)
    .option('--override <reason>', 'why it may be sealed though it shows no skill; stands in the bundle', reason)
    .option('--json', 'the result as JSON', false)
    .addHelpText(
      'after',
      '\nExample:\n  stillwell fit --site site.yaml --history logs/2023.csv logs/2024.csv --out fits/north-well',
    )
    .action(run);
}

async function run(options: FitCommandOptions): Promise<void> {
  const site = readSite(options.site);
  const { loaded, result, files } = await fitSite(jobOf(site, options), stepsShown());
  writeOutputs(files);
  const notes = surveyNotes(loaded.survey);
  process.stdout.write(
    options.json
      ? `${JSON.stringify({ ...candidateFacts(options.out, result), survey_notes: notes }, null, 2)}\n`
      : text(options.out, result, notes),
  );
}

function jobOf(site: Site, options: FitCommandOptions): FitSiteJob {
  return {
    site,
    history: options.history,
    out: options.out,
    zone: options.timeZone ?? null,
    span: timeSpan(options, site.timeZone),
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

function text(folder: string, result: FitResult, notes: readonly string[]): string {
  const survey = notes.map((note) => `Survey: ${note}\n`).join('');
  return `${fitSummary(result)}${survey}\nWritten to ${folder}: ${CANDIDATE_FILES}\n\n${ADVISORY}\n`;
}
