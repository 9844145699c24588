/** `stillwell survey`: what is wrong with a history, before anything is learned from it. */
import { Command } from 'commander';
import { type LoadedHistory, loadHistory, prepare } from '../history/load.ts';
import { draftSite } from '../history/site-draft.ts';
import { surveyText } from '../history/survey-text.ts';
import { several } from '../option-values.ts';
import { writeOutput } from '../output-file.ts';
import { createProgress, type Progress } from '../progress.ts';
import { readSite } from '../site-file.ts';

interface SurveyOptions {
  readonly site?: string;
  readonly history: string[];
  readonly timeZone?: string;
  readonly json: boolean;
  readonly out?: string;
}

/** The command, to be joined to the program. */
export function surveyCommand(): Command {
  return new Command('survey')
    .description(
      'Looks history files over: gaps, repeats, stuck sensors, clock changes, resolution, and what to do about them.',
    )
    .requiredOption(
      '--history <files...>',
      'CSV (wide, or long with time, signal, value) or NDJSON files, also gzipped',
      several,
    )
    .option('--site <file>', 'site file; without one, signals and tick are found in the files')
    .option('--time-zone <zone>', 'zone of times that carry none, such as Europe/London or +01:00')
    .option('--json', 'as JSON', false)
    .option('--out <file>', 'also write the survey as JSON to this file')
    .addHelpText(
      'after',
      '\nExamples:\n  stillwell survey --history logs/2023.csv logs/2024.csv --time-zone Europe/London\n  stillwell survey --site site.yaml --history logs/*.csv --out survey.json',
    )
    .action(survey);
}

async function survey(options: SurveyOptions): Promise<void> {
  const zone = options.timeZone ?? null;
  const progress = createProgress('reading');
  const { survey: found } =
    options.site === undefined
      ? await surveyWithoutSite(options.history, zone, progress)
      : await loadHistory(options.history, readSite(options.site), { zone, progress });
  const json = `${JSON.stringify(found, null, 2)}\n`;
  if (options.out !== undefined) writeOutput(options.out, json);
  process.stdout.write(options.json ? json : surveyText(found));
}

async function surveyWithoutSite(
  files: readonly string[],
  zone: string | null,
  progress: Progress,
): Promise<LoadedHistory> {
  const { history, undeclared } = await draftSite(files, {
    name: 'history',
    equipmentClass: 'general',
    zone,
    progress,
  });
  return prepare(history, undeclared);
}
