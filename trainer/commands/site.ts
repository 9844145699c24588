/** `stillwell site`: a first site file, from what a history tells. */
import { formatSite, isName, NAME_RULE, parseSite } from '@stillwell/protocol';
import { Command } from 'commander';
import { TrainError } from '../errors.ts';
import { counted } from '../history/finding.ts';
import { draftSite } from '../history/site-draft.ts';
import { refuseToReplace } from '../key-file.ts';
import { several } from '../option-values.ts';
import { writeOutput } from '../output-file.ts';
import { createProgress } from '../progress.ts';

interface SiteOptions {
  readonly history: string[];
  readonly name: string;
  readonly class: string;
  readonly timeZone?: string;
  readonly out?: string;
  readonly force: boolean;
  readonly json: boolean;
}

/** The command, to be joined to the program. */
export function siteCommand(): Command {
  return new Command('site')
    .description(
      'Writes a first site file from a history: signals, tick, resolution and ranges, with comments to go over.',
    )
    .requiredOption(
      '--history <files...>',
      'CSV (wide, or long with time, signal, value), NDJSON or Parquet files, text also as .gz or .zst; folders and patterns too',
      several,
    )
    .option('--name <name>', 'name of the site, one level of its topics', 'my-site')
    .option('--class <class>', 'equipment class, such as wet-well or cold-store', 'general')
    .option('--time-zone <zone>', 'where the plant stands, and zone of times that carry none, such as Europe/London')
    .option('--out <file>', 'file to write; standard output when absent')
    .option('--force', 'replace --out if it is there already', false)
    .option('--json', 'say what was found as JSON; needs --out', false)
    .addHelpText(
      'after',
      '\nExample:\n  stillwell site --history logs/2024.csv --name mill-lane --class wet-well --time-zone Europe/London --out site.yaml',
    )
    .action(writeSite);
}

async function writeSite(options: SiteOptions): Promise<void> {
  if (!isName(options.name)) throw new TrainError('options', `--name: expected ${NAME_RULE}, got "${options.name}"`);
  if (options.json && options.out === undefined)
    throw new TrainError(
      'options',
      '--json: expected --out beside it, since the site file itself goes to standard output; add --out',
    );
  if (options.out !== undefined) refuseToReplace(options.out, options.force);
  const { site, comments, note } = await draftSite(options.history, {
    name: options.name,
    equipmentClass: options.class,
    zone: options.timeZone ?? null,
    progress: createProgress('reading'),
  });
  const text = formatSite(site, comments);
  // Whatever is written must be read back: the same check the gateway makes.
  parseSite(text, options.out ?? 'site file');
  if (note !== null && !options.json) process.stderr.write(`${note}\n`);
  if (options.out === undefined) {
    process.stdout.write(text);
    return;
  }
  writeOutput(options.out, text);
  process.stdout.write(
    options.json
      ? `${JSON.stringify({ out: options.out, site: site.site, tick_ms: site.tickMs, horizon: site.horizon, signals: site.signals.map(({ name }) => name), ...(note === null ? {} : { note }) })}\n`
      : `${options.out}: ${site.site}, ${counted(site.signals.length, 'signal')}, tick ${site.tickMs / 1000} s, horizon ${site.horizon} ticks; go over it before fitting\n`,
  );
}
