/** `stillwell hindcast`: what a bundle would have forecast over a history, scored beside the rivals. */
import type { Bundle } from '@stillwell/protocol';
import { ADVISORY, describeSchemaDifference } from '@stillwell/protocol';
import { Command } from 'commander';
import { openProvenFile } from '../bundle-file.ts';
import { TrainError } from '../errors.ts';
import { believe, excludedNotes } from '../exclusions.ts';
import { lookLimits, olderNote, readNewest } from '../history/long.ts';
import { asTheGateway } from '../history/plausible.ts';
import type { Series } from '../history/series.ts';
import { layOnTicks } from '../history/ticks.ts';
import { declaredLimits } from '../judge/crossings.ts';
import { judge, verdictSteps } from '../judge/gate.ts';
import { type Hindcast, hindcast } from '../judge/hindcast.ts';
import { hindcastJson } from '../judge/hindcast-json.ts';
import { planWorth, planWorthJson } from '../judge/plan-worth.ts';
import { meanOf, skillScore } from '../judge/scores.ts';
import { blockText, crossingText, worstText } from '../judge/words.ts';
import { learnedSpans } from '../learned-spans.ts';
import { several } from '../option-values.ts';
import { plannedInputs, planWorthText } from '../plans.ts';
import { createProgress } from '../progress.ts';
import { readSite } from '../site-file.ts';
import type { TickSpan } from '../span.ts';
import { shortNumber, textTable } from '../text-table.ts';
import { timeSpan } from '../time-option.ts';

interface HindcastOptions {
  readonly bundle: string;
  readonly site: string;
  readonly history: string[];
  readonly timeZone?: string;
  readonly from?: string;
  readonly until?: string;
  readonly json: boolean;
}

/** The command, to be joined to the program. */
export function hindcastCommand(): Command {
  return new Command('hindcast')
    .description('Replays a bundle over a history tick by tick and scores its forecasts beside the obvious guesses.')
    .requiredOption('--bundle <file>', 'sealed bundle (.swb) or candidate (.swc)')
    .requiredOption('--site <file>', 'site file')
    .requiredOption(
      '--history <files...>',
      'CSV, NDJSON or Parquet files, text also as .gz or .zst; folders and patterns too',
      several,
    )
    .option('--time-zone <zone>', "zone of history times that carry none; the site's otherwise")
    .option(
      '--from <time>',
      'first reading judged; by default the first that the bundle neither learned nor was calibrated from',
    )
    .option('--until <time>', 'first reading no longer judged; by default the end of the history')
    .option('--json', 'every signal and step as JSON', false)
    .addHelpText(
      'after',
      '\nExample:\n  stillwell hindcast --bundle north-well.swb --site site.yaml --history logs/*.csv --from 2026-01-01 --json',
    )
    .action(run);
}

async function run(options: HindcastOptions): Promise<void> {
  const site = readSite(options.site);
  const { bundle, model, digest } = openProvenFile(options.bundle);
  const difference = describeSchemaDifference(bundle, site);
  if (difference !== null) {
    throw new TrainError(
      'bundle',
      `${options.bundle} was made for other readings than ${options.site} declares: ${difference}`,
    );
  }
  const { fromMs, untilMs } = timeSpan(options, site.timeZone);
  const progress = createProgress('reading');
  const { history, older, remembered } = await readNewest(options.history, site, {
    zone: options.timeZone ?? null,
    ...(untilMs === undefined ? {} : { untilMs }),
    progress,
    limits: lookLimits(site),
  });
  progress.end();
  // On the bundle's lattices, as the gateway would take them, whatever this history alone would show.
  const { seen, mark } = believe(history, site, remembered);
  const series = mark(
    layOnTicks(
      seen,
      site,
      bundle.channels.map((channel) => channel.lattice),
      asTheGateway(site),
    ),
  );
  const learned = learnedSpans(bundle);
  const fromTick = fromMs === undefined ? learned.seenTo : Math.ceil(fromMs / series.tickMs);
  // The filter warms up on the first ticks of a newest part, which have readings before them that it did not see.
  const warmFrom = older === null ? 0 : series.firstTick + bundle.warmupTicks;
  const span = judgedSpan(series, bundle, Math.max(fromTick, warmFrom), fromMs !== undefined);
  const note = olderNote(older, series.tickMs);
  refuseUnread(series, span, options.history);
  const units = bundle.channels.map((channel) => channel.unit);
  const limits = declaredLimits(site.signals.map((signal) => signal.limits));
  const cast = hindcast(model, series, { ...span, learn: learned.learn, limits }, units);
  const judged = { fromTick: span.fromTick - series.firstTick, toTick: span.toTick - series.firstTick };
  const worth = planWorth(model, series, judged, plannedInputs(site));
  const seenShare = Math.max(0, Math.min(1, (learned.seenTo - span.fromTick) / (span.toTick - span.fromTick)));
  const head = {
    bundle: Buffer.from(digest).toString('hex'),
    site: bundle.site,
    advisory: ADVISORY,
    seen_share: seenShare,
    ...(note === null ? {} : { note }),
  };
  process.stdout.write(
    options.json
      ? `${JSON.stringify({ ...head, ...hindcastJson(cast), ...planWorthJson(worth) }, null, 2)}\n`
      : `${tableText(cast)}\n\n${judgedText(cast)}\n${planWorthText(worth)}${seenText(seenShare)}${notesText(series)}${note === null ? '' : `Note: ${note}\n`}\n${ADVISORY}\n`,
  );
}

/** Worst times first: where the forecasts fail is what a person wants to look at. */
function judgedText(cast: Hindcast): string {
  const verdicts = judge(cast);
  const sentences = verdicts.signals.map((verdict) => `  ${verdict.sentence}`).join('\n');
  return [worstText(cast), sentences, blockText(verdicts), crossingText(cast), verdicts.sentence, '']
    .filter((text, k) => text !== '' || k === 5)
    .join('\n\n');
}

function notesText(series: Series): string {
  return excludedNotes(series)
    .map((note) => `Note: ${note}\n`)
    .join('');
}

function seenText(share: number): string {
  if (share === 0) return '';
  return `Note: ${percent(share)} of the judged time is time the bundle learned or was calibrated from, which flatters it.\n`;
}

function judgedSpan(series: Series, bundle: Bundle, asked: number, isAsked: boolean): TickSpan {
  const end = series.firstTick + series.ticks;
  const fromTick = Math.max(asked, series.firstTick + 1);
  if (end - fromTick >= bundle.horizon) return { fromTick, toTick: end };
  const why = isAsked ? 'the time given with --from' : 'the end of what the bundle learned and was calibrated from';
  throw new TrainError(
    'history',
    `The history ends at ${time(end, series.tickMs)}; expected at least ${bundle.horizon} ticks (one horizon) after ` +
      `${time(asked, series.tickMs)}, ${why}, got ${Math.max(0, end - fromTick)}. Give later history, or an earlier --from.`,
    { details: { from: asked, end } },
  );
}

/** A table of dashes would look like an answer. */
function refuseUnread(series: Series, span: TickSpan, files: readonly string[]): void {
  const signals = series.values.slice(0, series.signalCount);
  const [from, to] = [span.fromTick - series.firstTick, span.toTick - series.firstTick];
  if (signals.some((values) => values.subarray(from, to).some((value) => !Number.isNaN(value)))) return;
  throw new TrainError(
    'history',
    `${files.join(', ')}: expected readings of at least one signal from ${time(span.fromTick, series.tickMs)} to ` +
      `${time(span.toTick, series.tickMs)} to judge by, got none; check the columns, or give another --from`,
  );
}

function time(tick: number, tickMs: number): string {
  return new Date(tick * tickMs).toISOString();
}

function tableText(cast: Hindcast): string {
  const H = cast.horizon;
  const cells = cast.mse.length;
  const head = [
    'signal',
    'step',
    'mse',
    'mae',
    'standardised mse',
    ...cast.rivals.map((name) => `skill: ${name}`),
    'coverage',
    'width',
  ];
  const rows = cast.signals.flatMap((signal, i) =>
    verdictSteps(H).map((h) => {
      const cell = i * H + h - 1;
      return [
        `${signal} [${cast.units[i]}]`,
        String(h),
        shortNumber(cast.mse[cell]),
        shortNumber(cast.mae[cell]),
        shortNumber(cast.mseStandardised[cell]),
        ...cast.rivals.map((_, r) => percent(skillScore(cast.mse[cell], cast.rivalMse[r * cells + cell]))),
        percent(cast.coverage[cell]),
        shortNumber(cast.width[cell]),
      ];
    }),
  );
  const right = head.map((_, k) => k).slice(1);
  return [
    `${cast.origins} origins, ${new Date(cast.fromMs).toISOString()} to ${new Date(cast.toMs).toISOString()}`,
    textTable(head, rows, right),
    `Standardised by the learning part, over all signals and steps 1 to ${H}: mse ${shortNumber(meanOf(cast.mseStandardised))}, mae ${shortNumber(meanOf(cast.maeStandardised))}`,
  ].join('\n');
}

function percent(share: number): string {
  return Number.isFinite(share) ? `${(100 * share).toFixed(1)} %` : '-';
}
