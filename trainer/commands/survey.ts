/** `stillwell survey`: what is wrong with a history, before anything is learned from it. */
import type { Site } from '@stillwell/protocol';
import { Command } from 'commander';
import { prepare } from '../history/load.ts';
import { LET_PASS, loadLong, lookLimits, olderNote } from '../history/long.ts';
import { draftSite } from '../history/site-draft.ts';
import type { Survey } from '../history/survey.ts';
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
      'CSV (wide, or long with time, signal, value), NDJSON or Parquet files, text also as .gz or .zst; folders and patterns too',
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
  const { survey: found, note } =
    options.site === undefined
      ? await surveyWithoutSite(options.history, zone, progress)
      : await surveyOf(options.history, readSite(options.site), zone, progress);
  const json = `${JSON.stringify(note === null ? found : { ...found, note }, null, 2)}\n`;
  if (options.out !== undefined) writeOutput(options.out, json);
  process.stdout.write(options.json ? json : `${surveyText(found)}${note === null ? '' : `\n${note}\n`}`);
}

/** A survey, and what it leaves out of a long history. */
interface Surveyed {
  readonly survey: Survey;
  readonly note: string | null;
}

async function surveyOf(
  files: readonly string[],
  site: Site,
  zone: string | null,
  progress: Progress,
): Promise<Surveyed> {
  const options = { zone, progress, limits: lookLimits(site) };
  const { survey: found, older } = await loadLong(files, site, options, () => LET_PASS);
  return { survey: found, note: olderNote(older, site.tickMs) };
}

async function surveyWithoutSite(files: readonly string[], zone: string | null, progress: Progress): Promise<Surveyed> {
  const { history, undeclared, note } = await draftSite(files, {
    name: 'history',
    equipmentClass: 'general',
    zone,
    progress,
  });
  return { survey: prepare(history, undeclared).survey, note };
}
