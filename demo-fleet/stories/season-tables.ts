/**
 * A season's outcome as tables for people: skill and coverage stretch by stretch, the way of the segments, what the refit
 * gained.
 */
import type { ArchiveComparison } from '../archive-check.ts';
import type { DeskSite } from '../fleet.ts';
import { formatColumns } from '../progress.ts';
import { RIVALS, type Score } from '../scores.ts';
import type { SegmentCounts } from '../segment-watch.ts';
import type { SiteRun } from '../site-run.ts';
import type { WarningWatch } from '../warning-watch.ts';
import { WORN_SITE } from './season-plan.ts';

/** What one site came to. */
export interface SiteOutcome {
  readonly site: SiteRun;
  readonly scores: readonly Score[];
  readonly counts: SegmentCounts;
  readonly desk: DeskSite;
  readonly archive: ArchiveComparison;
  readonly memory: number;
}

/** Error, rivals' errors, skill and coverage. */
export function skillTable(outcomes: readonly SiteOutcome[]): string {
  const rows = outcomes.flatMap(({ site, scores }) =>
    scores.map((score) => [
      site.name,
      score.label,
      kindOf(site, score.label),
      String(score.pairs),
      score.mse.toFixed(3),
      ...score.rivalMse.map((mse) => mse.toFixed(3)),
      `${(100 * score.skill).toFixed(1)} %`,
      `${(100 * score.coverage).toFixed(1)} %`,
    ]),
  );
  return (
    'Forecasts received over MQTT, all signals and steps, squared error in units of each signal’s variance:\n' +
    formatColumns(['site', 'stretch', 'kind', 'pairs', 'ours', ...RIVALS, 'skill', 'coverage'], rows)
  );
}

/** Kind of the model that served in a stretch. */
function kindOf(site: SiteRun, label: string): string {
  return (label === 'refitted' ? site.serving : site.bundles[0]).bundle.kind;
}

/** Segments, archive, sizes and memory. */
export function segmentTable(outcomes: readonly SiteOutcome[]): string {
  const rows = outcomes.map(({ site, counts, desk, archive, memory }) => [
    site.name,
    String(counts.segments),
    String(desk.segments),
    String(desk.doubled),
    String(counts.segments - desk.segments),
    String(archive.readings),
    String(archive.missing + archive.different + archive.invented),
    String(desk.corrections),
    (desk.bitsPerReading ?? Number.NaN).toFixed(2),
    String(site.serving.bytes),
    memory.toFixed(0),
  ]);
  const heads = [
    'site',
    'sent',
    'received',
    'doubled',
    'lost',
    'readings',
    'wrong',
    'late merged',
    'bits/reading',
    'bundle B',
    'MiB',
  ];
  return `Segments, archive against what the sensors said, bundle size, gateway memory:\n${formatColumns(heads, rows)}`;
}

/** What was warned of, as sentences. */
export function warningLines(sites: readonly SiteRun[], warnings: WarningWatch): string {
  const heard = sites.flatMap(({ name }) => {
    const { opened, cameTrue, leads, messages } = warnings.of(name);
    if (opened === 0) return [];
    const lead = [...leads].sort((a, b) => a - b)[leads.length >> 1];
    const ahead = lead === undefined ? '' : `, ${lead} min ahead in the middle`;
    return [`${name} ${opened} opened, ${cameTrue} came true${ahead} (${messages} messages)`];
  });
  return `Warnings of limits: ${heard.length === 0 ? 'none' : heard.join('; ')}`;
}

/** What the refit gained, as a sentence. */
export function refitLine(before: Score | null, after: Score | null): string {
  if (before === null || after === null) return `${WORN_SITE}: no forecast of the refitted bundle came in`;
  return (
    `${WORN_SITE} after it wore and the refit was rolled: error ${after.mse.toFixed(3)}, ` +
    `with the old bundle it would have been ${before.mse.toFixed(3)} (${after.pairs} pairs)`
  );
}
