/**
 * What a season came to: skill and coverage of the forecasts received, the way of the segments, the archive against the
 * truth, what the refit gained, sizes and memory.
 */
import { readArchive } from '@stillwell/trainer';
import { compareArchive } from '../archive-check.ts';
import { expectBetween, expectExactly, type Verdict } from '../check.ts';
import type { DeskSite, Fleet } from '../fleet.ts';
import type { Score } from '../scores.ts';
import type { SegmentCounts } from '../segment-watch.ts';
import type { SiteRun } from '../site-run.ts';
import type { StandIn } from '../stand-in.ts';
import { type Defrosts, planLine, planOutcome, planVerdicts, WRONG_PLAN } from './season-defrosts.ts';
import { LEAST_SKILL, PLANNED, PLANNED_SITE, ROUGH, segmentTicks, WORN_SITE } from './season-plan.ts';
import { refitLine, type SiteOutcome, segmentTable, skillTable, warningLines } from './season-tables.ts';
import type { StoryContext, StoryResult } from './story.ts';

/** Bounds of the promises. */
const MAX_BUNDLE_BYTES = 24 * 1024;
/** At several hundred times real speed; at the plant's own pace a gateway needs less. */
const MAX_GATEWAY_MIB = 110;
/** Coverage of bounds of 90 %: while the plant is as learned, and in any other stretch. */
const COVERAGE = [0.85, 0.95] as const;
const COVERAGE_OTHERWISE = [0.8, 0.97] as const;
const MAX_BITS = 6.5;
/** Share of the old bundle's error that the refitted one saves on the worn plant. */
const LEAST_REFIT_GAIN = 0.5;
const SETTLE_SECONDS = 120;
/** Stretches scored, in order. */
const LABELS = ['as learned', WRONG_PLAN, 'worn', 'refitted'] as const;
/** Label under which the old bundle of the worn site is scored beside the new one. */
export const STAND_IN = 'old bundle';

interface Inputs {
  readonly context: StoryContext;
  readonly fleet: Fleet;
  readonly sites: readonly SiteRun[];
  readonly worn: SiteRun;
  readonly standIn: StandIn;
  readonly defrosts: Defrosts;
}

/** Waits for the last segments, compares and judges. */
export async function gatherOutcome(inputs: Inputs): Promise<Omit<StoryResult, 'linger'>> {
  const { context, fleet, sites, worn, standIn, defrosts } = inputs;
  context.narrator.live('waiting for the last segments to be decoded');
  for (const site of sites) await fleet.untilArchived(site.name, SETTLE_SECONDS);
  const status = await fleet.deskStatus();
  const outcomes: SiteOutcome[] = [];
  for (const site of sites) outcomes.push(await outcomeOf(site, fleet, status));
  const before = standIn.scorer.score(STAND_IN, worn.deviations);
  const after = worn.scorer.score('refitted', worn.deviations);
  const plan = planOutcome(defrosts);
  const verdicts = [
    ...outcomes.flatMap(siteVerdicts),
    ...refitVerdicts(before, after),
    ...planVerdicts(plan),
    ...warningVerdicts(sites, fleet),
    // Without one sent twice, the promise that doubles are kept once would be kept by doing nothing.
    expectBetween(
      'fleet',
      'segments were sent twice on purpose',
      sumOf(outcomes, (one) => one.counts.doubled),
      [1, Number.POSITIVE_INFINITY],
    ),
    expectBetween(
      'fleet',
      'wells whose pumps were found: switched kind',
      sites.filter((site) => site.isWell && site.bundles[0].bundle.kind === 'switched').length,
      [2, Number.POSITIVE_INFINITY],
    ),
    expectExactly('fleet', 'every message of a gateway can be read', fleet.unreadable.length, 0),
  ];
  return {
    report: [
      skillTable(outcomes),
      segmentTable(outcomes),
      refitLine(before, after),
      planLine(plan),
      warningLines(sites, fleet.warnings),
    ].join('\n\n'),
    verdicts,
    figures: {
      sites: outcomes.map(figuresOf),
      refit: { before, after },
      plan,
      warnings: Object.fromEntries(fleet.warnings.bySite),
      unreadable: fleet.unreadable,
    },
    lookAt: lookAt(fleet, sites),
  };
}

async function outcomeOf(site: SiteRun, fleet: Fleet, status: readonly DeskSite[]): Promise<SiteOutcome> {
  const archive = await readArchive(fleet.archiveFolder, site.name);
  const last = archive.ticks[archive.ticks.length - 1];
  const names = site.description.channels.map((channel) => channel.name);
  const desk = status.find((one) => one.site === site.name);
  const counts = fleet.segments.bySite.get(site.name);
  if (desk === undefined || counts === undefined)
    throw new Error(`${site.name}: expected segments at the desk, got none`);
  return {
    site,
    scores: LABELS.flatMap((label) => site.scorer.score(label, site.deviations) ?? []),
    counts,
    desk,
    // A very late reading may still be on its way to the segment after the last one decoded.
    archive: compareArchive(archive, names, site.said, site.playTick, last - ROUGH.veryLateTicks - 1),
    memory: fleet.memory.get(site.name) ?? Number.NaN,
  };
}

function siteVerdicts({ site, scores, counts, desk, archive, memory }: SiteOutcome): Verdict[] {
  const learned = scores.find((score) => score.label === 'as learned');
  const largest = Math.max(...site.bundles.map((bundle) => bundle.bytes));
  const percent = (x: number): string => `${(100 * x).toFixed(1)} %`;
  const wrong = archive.missing + archive.different + archive.invented;
  const expectedTicks = site.said.length - 2 * segmentTicks(site.perDay) - 2 * ROUGH.veryLateTicks;
  const least = LEAST_SKILL[site.name];
  return [
    expectBetween(
      site.name,
      `forecasts beat the best rival by ${percent(least)}`,
      learned?.skill ?? Number.NaN,
      [least, 1],
      percent,
    ),
    ...scores.map(({ label, coverage }) => {
      const bounds = label === 'as learned' ? COVERAGE : COVERAGE_OTHERWISE;
      const promise = `bounds of 90 % hold ${bounds.map((x) => (100 * x).toFixed(0)).join(' to ')} %, ${label}`;
      return expectBetween(site.name, promise, coverage, bounds, percent);
    }),
    ...segmentVerdicts(site.name, counts, desk),
    {
      subject: site.name,
      promise: 'archive holds every reading the sensors said, bit for bit',
      outcome: wrong === 0 ? `${archive.readings} readings` : `${wrong} wrong: ${archive.example}`,
      isKept: archive.readings > 0 && wrong === 0,
    },
    expectBetween(site.name, `archive reaches to tick ${expectedTicks} of play`, archive.ticks, [
      expectedTicks,
      Number.POSITIVE_INFINITY,
    ]),
    expectBetween(
      site.name,
      `at most ${MAX_BITS} bits a reading`,
      desk.bitsPerReading ?? Number.NaN,
      [0, MAX_BITS],
      (x) => x.toFixed(2),
    ),
    expectBetween(site.name, 'bundle at most 24 KiB', largest, [1, MAX_BUNDLE_BYTES], (x) => `${x} bytes`),
    expectBetween(
      site.name,
      `gateway at most ${MAX_GATEWAY_MIB} MiB`,
      memory,
      [1, MAX_GATEWAY_MIB],
      (x) => `${x.toFixed(0)} MiB`,
    ),
  ];
}

/** What passed the broker against what the desk kept. A difference of either sign is one: the two must not cancel. */
export function segmentVerdicts(
  site: string,
  counts: Pick<SegmentCounts, 'segments' | 'doubled'>,
  desk: Pick<DeskSite, 'segments' | 'broken' | 'doubled'>,
): Verdict[] {
  return [
    expectExactly(site, 'segments sent and not kept, or kept and never sent', desk.segments - counts.segments, 0),
    expectExactly(site, 'segments that could not be decoded', desk.broken, 0),
    expectBetween(site, 'doubled segments were seen and kept once', desk.doubled, [
      counts.doubled,
      Number.POSITIVE_INFINITY,
    ]),
  ];
}

function sumOf(outcomes: readonly SiteOutcome[], pick: (one: SiteOutcome) => number): number {
  return outcomes.reduce((sum, one) => sum + pick(one), 0);
}

/** Through a lost power, a cut link and everything else each warning opens once and then ends. */
function warningVerdicts(sites: readonly SiteRun[], { warnings }: Fleet): Verdict[] {
  const counts = sites.map(({ name }) => warnings.of(name));
  return [
    expectBetween(
      'fleet',
      'warnings of limits opened',
      counts.reduce((sum, one) => sum + one.opened, 0),
      [1, Number.POSITIVE_INFINITY],
    ),
    expectExactly(
      'fleet',
      'warnings that opened twice, or ended without a beginning',
      counts.reduce((sum, one) => sum + one.odd, 0),
      0,
    ),
  ];
}

function refitVerdicts(before: Score | null, after: Score | null): Verdict[] {
  const gain = before === null || after === null ? Number.NaN : 1 - after.mse / before.mse;
  return [
    expectBetween(
      WORN_SITE,
      'refitted bundle beats the old one on the days after',
      gain,
      [LEAST_REFIT_GAIN, 1],
      (x) => `${(100 * x).toFixed(1)} % less error`,
    ),
  ];
}

function figuresOf({ site, scores, counts, desk, archive, memory }: SiteOutcome): Record<string, unknown> {
  const bundles = site.bundles.map(({ bytes, digest, bundle }) => ({ kind: bundle.kind, bytes, digest }));
  return {
    site: site.name,
    signals: site.signalNames,
    scores,
    segments: counts,
    desk,
    archive,
    bundles,
    memoryMiB: memory,
    path: site.telemetry.counts,
  };
}

function lookAt(fleet: Fleet, sites: readonly SiteRun[]): string[] {
  return [
    `broker          ${fleet.broker.url}`,
    `live forecasts  npx stillwell watch --broker ${fleet.broker.url} --site ${sites[0].name} --clock readings`,
    `what if there were no plan  npx stillwell ask --broker ${fleet.broker.url} --site ${PLANNED_SITE} --plan ${PLANNED.input}=none`,
    `what the desk holds  npx stillwell desk status --data ${fleet.archiveFolder}`,
  ];
}
