/**
 * The whole loop on six simulated sites. Past logs become bundles, bundles become live forecasts, a plant wears, its
 * residuals become the next bundle; on the way a gateway loses power, a link drops, the desk goes home, sensors fail and
 * messages come late or twice. Ends with promise against outcome.
 */
import { mkdirSync } from 'node:fs';
import { join } from 'node:path';
import { Fleet, type GatewayStart } from '../fleet.ts';
import type { PlanWatch } from '../plan-watch.ts';
import { DEMO_SITES } from '../plants/sites.ts';
import { inParallel } from '../processes.ts';
import { SiteRun } from '../site-run.ts';
import { StandIn } from '../stand-in.ts';
import { Workshop } from '../workshop.ts';
import { isWrongPlan, planDefrosts, WRONG_PLAN, watchPlan } from './season-defrosts.ts';
import { gatherOutcome, STAND_IN } from './season-outcome.ts';
import {
  DEFAULT_DAYS,
  DOUBLE_EVERY,
  faultsOf,
  HABITS,
  HISTORY_DAYS,
  LINK_CUT_SITE,
  PLANNED,
  PLANNED_SITE,
  PLAY_MS,
  POWER_CUT_SITE,
  ROUGH,
  segmentTicks,
  type Timetable,
  timetableOf,
  WEAR,
  WORN_SITE,
} from './season-plan.ts';
import type { Story, StoryContext, StoryResult } from './story.ts';

/** Fits and refits under way at once: one a core of the smallest machine meant. */
const FIT_WIDTH = 2;
const START_SECONDS = 120;
const LINGER_MS = 1000;

/** The story. */
export const season: Story = {
  name: 'season',
  summary: 'three wet wells and three cold stores: fit, run, wear, refit, roll (the default)',
  play,
};

/** Everything a season needs at hand. */
interface Season {
  readonly context: StoryContext;
  readonly timetable: Timetable;
  readonly sites: readonly SiteRun[];
  readonly fleet: Fleet;
  readonly workshop: Workshop;
  readonly worn: SiteRun;
}

async function play(context: StoryContext): Promise<StoryResult> {
  const { narrator, folder } = context;
  const timetable = timetableOf(context.days ?? DEFAULT_DAYS);
  const sites = makeSites(context);
  narrator.say(`${sites.length} sites, ${HISTORY_DAYS} days of past each, ${timetable.end} days to play`);
  const planned = siteNamed(sites, PLANNED_SITE);
  const watch = watchPlan();
  const fleet = await openFleet(context, sites, watch, planned);
  const workshop = new Workshop(join(folder, 'workshop'), fleet.processes);
  const season: Season = { context, timetable, sites, fleet, workshop, worn: siteNamed(sites, WORN_SITE) };
  await fitAll(season);
  await startAll(season);
  const defrosts = planDefrosts(planned, context.seed, timetable, fleet, watch);
  const incidents = scheduleIncidents(season);

  await playTo(season, timetable.worn, 'as learned');
  season.worn.plant.wear(WEAR);
  narrator.say(`${WORN_SITE}: the pumps have worn and lift less; play goes on, the desk collects the residuals`);
  await playTo(season, timetable.refitted, 'worn');
  const old = season.worn.serving;
  const standIn = new StandIn(season.worn, old, (_, digest) => (digest === old.digest ? null : STAND_IN));
  await refitWorn(season);
  await rollWorn(season);
  await playTo(season, timetable.end, 'refitted');
  await Promise.all(incidents);
  const result = await gatherOutcome({ ...season, standIn, defrosts });
  return { ...result, linger: (signal) => linger(season, signal) };
}

function makeSites(context: StoryContext): SiteRun[] {
  return DEMO_SITES.map((site, i) => {
    const run = new SiteRun({
      site,
      habit: HABITS[i],
      seed: context.seed,
      playMs: PLAY_MS,
      historyDays: HISTORY_DAYS,
      faults: faultsOf(site.name, 86_400_000 / site.design.tickMs),
      roughness: ROUGH,
    });
    run.writeFiles(join(context.folder, 'sites', site.name));
    return run;
  });
}

function siteNamed(sites: readonly SiteRun[], name: string): SiteRun {
  const found = sites.find((site) => site.name === name);
  if (found === undefined) throw new Error(`story: expected a site named ${name}`);
  return found;
}

async function openFleet(
  context: StoryContext,
  sites: readonly SiteRun[],
  watch: PlanWatch,
  planned: SiteRun,
): Promise<Fleet> {
  const logs = join(context.folder, 'logs');
  mkdirSync(logs, { recursive: true });
  const byName = new Map(sites.map((site) => [site.name, site]));
  const fleet = await Fleet.open({
    folder: context.folder,
    doubleEvery: DOUBLE_EVERY,
    onForecasts: (name, message) => byName.get(name)?.hear(message),
    closely: {
      site: planned.name,
      signal: PLANNED.signal,
      hear: (one) => watch.hear(one, planned.labelOf(Date.parse(one.origin) / planned.tickMs, one.bundle ?? '')),
    },
    onUnexpectedEnd: (name, detail) => {
      for (const site of sites) site.play?.fail(new Error(`${name} ended by itself: ${detail}`));
    },
  });
  context.onFleet(fleet);
  return fleet;
}

async function fitAll({ context, workshop, sites }: Season): Promise<void> {
  const { narrator, seed } = context;
  await workshop.makeKeys();
  let done = 0;
  const jobs = sites.map((site) => async () => {
    const candidate = await workshop.fit(site.name, site.siteFile, site.historyFiles, seed);
    const sealed = await workshop.seal(site.name, candidate);
    site.bundles.push(sealed);
    done++;
    narrator.live(`fitted and sealed ${done} of ${sites.length}: ${site.name}, ${sealed.bytes} bytes`);
  });
  await inParallel(jobs, FIT_WIDTH);
  narrator.say(
    `${sites.length} bundles fitted and sealed, the largest ${Math.max(...sites.map((s) => s.serving.bytes))} bytes`,
  );
}

function gatewayStart({ workshop }: Season, site: SiteRun): GatewayStart {
  return {
    site: site.name,
    siteFile: site.siteFile,
    trust: workshop.publicKey,
    bundle: site.bundles[0].file,
    segmentTicks: segmentTicks(site.perDay),
  };
}

async function startAll(season: Season): Promise<void> {
  const { context, fleet, workshop, sites } = season;
  fleet.startDesk(workshop.bundleFolder);
  for (const site of sites) fleet.startGateway(gatewayStart(season, site));
  const serves = ['warming', 'running'];
  await Promise.all(
    sites.map((site) =>
      fleet.untilHealth(site.name, 'a gateway that serves', (health) => serves.includes(health.status), START_SECONDS),
    ),
  );
  for (const site of sites) {
    site.labelOf = labelsOf(site, season.timetable);
    site.open((topic, payload) => fleet.publish(topic, payload));
  }
  context.narrator.say(`broker ${fleet.broker.url}, one desk, ${sites.length} gateways running`);
}

/** A forecast is scored under the stretch of its origin; after the roll, under the bundle it names. */
function labelsOf(site: SiteRun, timetable: Timetable): (tick: number, digest: string) => string {
  return (tick, digest) => {
    const day = (tick - site.playTick) / site.perDay;
    if (day < timetable.learned) return 'warming up';
    if (site.name === PLANNED_SITE && isWrongPlan(site, timetable, tick)) return WRONG_PLAN;
    if (site.name !== WORN_SITE || day < timetable.worn) return 'as learned';
    return digest === site.bundles[0].digest ? 'worn' : 'refitted';
  };
}

async function playTo({ context, fleet, sites, timetable }: Season, day: number, what: string): Promise<void> {
  const show = setInterval(() => {
    const dayOf = (site: SiteRun): number => ((site.play?.tick ?? site.playTick) - site.playTick) / site.perDay;
    const slowest = Math.min(...sites.map(dayOf));
    const segments = [...fleet.segments.bySite.values()].reduce((sum, counts) => sum + counts.segments, 0);
    const messages = sites.reduce((sum, site) => sum + (site.play?.messages ?? 0), 0);
    context.narrator.live(
      `${what}: day ${slowest.toFixed(2)} of ${timetable.end}, ${messages} readings sent, ${segments} segments`,
    );
  }, 200);
  try {
    await Promise.all(sites.map((site) => site.play?.playUntil(site.playTick + Math.round(day * site.perDay))));
  } finally {
    clearInterval(show);
  }
}

/** Arms what befalls the fleet; each resolves when it is over. */
function scheduleIncidents(season: Season): Promise<void>[] {
  const { context, fleet, sites, timetable, workshop } = season;
  const { narrator } = context;
  const powerCut = siteNamed(sites, POWER_CUT_SITE);
  const linkCut = siteNamed(sites, LINK_CUT_SITE);
  const away = powerCut.when(timetable.deskAway, async () => {
    narrator.say('the desk goes away; gateways keep their segments');
    await fleet.stopDesk();
  });
  return [
    away,
    powerCut.when(timetable.powerCut, async () => {
      await fleet.killGateway(powerCut.name);
      fleet.startGateway(gatewayStart(season, powerCut));
      narrator.say(`${powerCut.name}: gateway lost power and starts again`);
    }),
    linkCut.when(timetable.linkCut, async () => {
      const cut = fleet.cutLink(linkCut.name);
      narrator.say(`${linkCut.name}: link cut under ${cut} connection${cut === 1 ? '' : 's'}`);
    }),
    powerCut.when(timetable.deskBack, async () => {
      await away;
      fleet.startDesk(workshop.bundleFolder);
      narrator.say('the desk is back');
    }),
  ];
}

async function refitWorn({ context, fleet, workshop, worn, timetable }: Season): Promise<void> {
  await fleet.untilArchived(worn.name, START_SECONDS);
  const since = new Date(worn.playTick * worn.tickMs + timetable.worn * 86_400_000).toISOString();
  context.narrator.live(`${worn.name}: refitting from what the desk collected since ${since}`);
  const candidate = await workshop.refit(`${worn.name}-2`, worn.siteFile, fleet.archiveFolder, worn.serving, since);
  worn.bundles.push(await workshop.seal(`${worn.name}-2`, candidate));
  context.narrator.say(`${worn.name}: refitted from the archive and sealed, ${worn.serving.bytes} bytes`);
}

async function rollWorn({ context, fleet, workshop, worn }: Season): Promise<void> {
  await workshop.roll(worn.serving, fleet.broker.url);
  context.narrator.say(`${worn.name}: the gateway serves the new bundle`);
}

/** Goes on at one tick a second until aborted, so that there is something to look at. */
async function linger({ sites }: Season, signal: AbortSignal): Promise<void> {
  while (!signal.aborted) {
    await Promise.all(sites.map((site) => site.play?.playUntil(site.play.tick + 1)));
    await new Promise((resolve) => setTimeout(resolve, LINGER_MS));
  }
}
