/**
 * The same main job on measured data: four motes' temperature and humidity. Learns from the first part, replays the rest
 * through a broker and real gateways, and says how the forecasts fared beside the obvious ones, whichever way it goes.
 * Skill is reported, not promised: nobody has promised that five minutes of a room's air can be foretold.
 */
import { mkdirSync } from 'node:fs';
import { join } from 'node:path';
import { type ForecastsMessage, forecastPathOf } from '@stillwell/protocol';
import { readArchive } from '@stillwell/trainer';
import { compareArchive } from '../archive-check.ts';
import { expectBetween, expectExactly, type Verdict } from '../check.ts';
import { Fleet } from '../fleet.ts';
import {
  describeMote,
  FIRST_TICK,
  learnCount,
  MOTE_HORIZON,
  moteName,
  moteReadings,
  moteSource,
  writeMoteHistory,
  writeMoteSite,
} from '../mote-site.ts';
import { SitePlay } from '../play.ts';
import { inParallel } from '../processes.ts';
import { formatColumns } from '../progress.ts';
import { Scorer } from '../scores.ts';
import { CADENCE_MS, DATA_NOTICE, type Mote, readMotes } from '../sensor-network.ts';
import { LATENESS_TICKS } from '../site-files.ts';
import { type SealedBundle, Workshop } from '../workshop.ts';
import type { Story, StoryContext, StoryResult } from './story.ts';

/** Readings of the learned part that are replayed first, to warm the filter. */
const WARM_READINGS = 600;
const SEGMENT_TICKS = 240;
const WINDOW = 4;
const PATIENCE_SECONDS = 90;
const SETTLE_SECONDS = 120;
const LEAST_FORECAST_SHARE = 0.25;
const UNSEEN = 'unseen';

/** The story. */
export const real: Story = {
  name: 'real',
  summary: 'measured data: four motes of a sensor network, learned from the first part, replayed for the rest',
  play,
};

interface MoteRun {
  readonly mote: Mote;
  readonly name: string;
  readonly siteFile: string;
  readonly bundle: SealedBundle;
  readonly scorer: Scorer;
  readonly said: Float64Array[];
  readonly playTick: number;
  play: SitePlay | null;
}

async function play(context: StoryContext): Promise<StoryResult> {
  const { narrator, folder, seed } = context;
  const motes = readMotes();
  narrator.say(DATA_NOTICE);
  narrator.say(
    'no times are recorded: readings are laid at their stated 5 s cadence from noon UTC of 9 May 2010; one site a mote',
  );
  mkdirSync(join(folder, 'logs'), { recursive: true });
  const runs: MoteRun[] = [];
  const fleet = await Fleet.open({
    folder,
    doubleEvery: 0,
    onForecasts: (name, message) => {
      const run = runs.find((one) => one.name === name);
      if (run !== undefined) hear(run, message);
    },
    onUnexpectedEnd: (name, detail) => {
      for (const run of runs) run.play?.fail(new Error(`${name} ended by itself: ${detail}`));
    },
  });
  context.onFleet(fleet);
  const workshop = new Workshop(join(folder, 'workshop'), fleet.processes);
  await workshop.makeKeys();
  const made = await inParallel(
    motes.map((mote) => () => prepare(folder, workshop, mote, seed)),
    2,
  );
  runs.push(...made);
  narrator.say(
    `fitted and sealed ${runs.length} bundles on the first part of each record; labelled events are in it, left as they are`,
  );
  fleet.startDesk(workshop.bundleFolder);
  for (const run of runs) {
    const { name: site, siteFile, bundle } = run;
    fleet.startGateway({ site, siteFile, trust: workshop.publicKey, bundle: bundle.file, segmentTicks: SEGMENT_TICKS });
  }
  await Promise.all(
    runs.map((run) =>
      fleet.untilHealth(
        run.name,
        'a gateway that serves',
        (h) => h.status === 'warming' || h.status === 'running',
        120,
      ),
    ),
  );
  narrator.say(`broker ${fleet.broker.url}, one desk, ${runs.length} gateways running`);
  await Promise.all(runs.map((run) => replay(fleet, run)));
  narrator.live('waiting for the last segments to be decoded');
  for (const run of runs) await fleet.untilArchived(run.name, SETTLE_SECONDS);
  const judged = await inParallel(
    runs.map((run) => () => hindcast(folder, fleet, run)),
    2,
  );
  return outcome(fleet, runs, judged);
}

async function prepare(folder: string, workshop: Workshop, mote: Mote, seed: number): Promise<MoteRun> {
  const name = moteName(mote);
  const own = join(folder, 'sites', name);
  const siteFile = writeMoteSite(own, mote);
  const learn = learnCount(mote);
  const history = writeMoteHistory(own, mote, 0, learn, 'learned.csv');
  const bundle = await workshop.seal(name, await workshop.fit(name, siteFile, [history], seed));
  const playTick = FIRST_TICK + learn - WARM_READINGS;
  const scorer = new Scorer({ signals: 2, horizon: MOTE_HORIZON, period: null, firstTick: FIRST_TICK });
  for (let k = 0; k < learn - WARM_READINGS; k++) scorer.addReadings(moteReadings(mote, k));
  return { mote, name, siteFile, bundle, scorer, said: [], playTick, play: null };
}

function hear(run: MoteRun, message: ForecastsMessage): void {
  const origin = message.originMs / CADENCE_MS;
  const path = new Float64Array(2 * 3 * MOTE_HORIZON);
  for (let i = 0; i < 2; i++) {
    const { median, lower, upper } = forecastPathOf(message, i);
    for (const [row, part] of [median, lower, upper].entries()) path.set(part, (i * 3 + row) * MOTE_HORIZON);
  }
  run.scorer.addForecast(origin, origin - FIRST_TICK < learnCount(run.mote) - 1 ? 'warming up' : UNSEEN, path);
  run.play?.noteClosed(origin);
}

async function replay(fleet: Fleet, run: MoteRun): Promise<void> {
  run.play = new SitePlay({
    description: describeMote(run.mote),
    source: moteSource(run.mote),
    firstTick: run.playTick,
    publish: (topic, payload) => fleet.publish(topic, payload),
    window: WINDOW,
    patienceSeconds: PATIENCE_SECONDS,
    onSaid: (_tick, said) => {
      run.said.push(said);
      run.scorer.addReadings(said);
    },
  });
  await run.play.playUntil(FIRST_TICK + run.mote.temperature.length);
}

/** What the trainer's own judge says of the same bundle on the same unseen part. */
interface Judged {
  readonly mse: number;
  readonly coverage: number;
  readonly rivals: Readonly<
    Record<string, { readonly mse_standardised: number | null; readonly skill: number | null }>
  >;
}

/** Has the trainer judge the unseen part as well: that adds the rivals that have to be fitted first. */
async function hindcast(folder: string, fleet: Fleet, run: MoteRun): Promise<Judged> {
  const whole = writeMoteHistory(
    join(folder, 'sites', run.name),
    run.mote,
    0,
    run.mote.temperature.length,
    'whole.csv',
  );
  const from = new Date((FIRST_TICK + learnCount(run.mote)) * CADENCE_MS).toISOString();
  const text = await fleet.processes.run('stillwell', [
    'hindcast',
    ...['--bundle', run.bundle.file],
    ...['--site', run.siteFile],
    ...['--history', whole],
    ...['--from', from],
    '--json',
  ]);
  const { average } = JSON.parse(text) as {
    average: { mse_standardised: number; coverage: number; rivals: Judged['rivals'] };
  };
  return { mse: average.mse_standardised, coverage: average.coverage, rivals: average.rivals };
}

async function outcome(fleet: Fleet, runs: readonly MoteRun[], judged: readonly Judged[]): Promise<StoryResult> {
  const status = await fleet.deskStatus();
  const verdicts: Verdict[] = [];
  const figures: Record<string, unknown>[] = [];
  for (const [i, run] of runs.entries()) {
    const deviations = run.bundle.bundle.channels.map((channel) => channel.scale);
    const score = run.scorer.score(UNSEEN, deviations);
    const archive = await readArchive(fleet.archiveFolder, run.name);
    const names = describeMote(run.mote).channels.map((channel) => channel.name);
    const last = archive.ticks[archive.ticks.length - 1];
    const found = compareArchive(archive, names, run.said, run.playTick, last);
    const desk = status.find((one) => one.site === run.name);
    const unseen = run.mote.temperature.length - learnCount(run.mote);
    // A gateway that closes several ticks in one go publishes the forecast of the last of them.
    const pairs = (unseen - MOTE_HORIZON - LATENESS_TICKS) * MOTE_HORIZON * 2 * LEAST_FORECAST_SHARE;
    verdicts.push(
      expectBetween(run.name, 'forecasts came for a quarter of the unseen origins or more', score?.pairs ?? 0, [
        pairs,
        Number.POSITIVE_INFINITY,
      ]),
      expectExactly(
        run.name,
        'archive differs from the record in',
        found.missing + found.different + found.invented,
        0,
      ),
      expectBetween(run.name, 'archive reaches the last segment', found.ticks, [
        run.said.length - SEGMENT_TICKS - LATENESS_TICKS - 1,
        Number.POSITIVE_INFINITY,
      ]),
      expectExactly(
        run.name,
        'segments lost',
        (fleet.segments.bySite.get(run.name)?.segments ?? 0) - (desk?.segments ?? 0),
        0,
      ),
    );
    figures.push({ site: run.name, score, judged: judged[i], archive: found, desk, bundleBytes: run.bundle.bytes });
  }
  return {
    report: `${receivedTable(runs)}\n\n${judgedTable(runs, judged)}\n\n${DATA_NOTICE}`,
    verdicts,
    figures: { data: DATA_NOTICE, motes: figures },
    lookAt: [
      `broker          ${fleet.broker.url}`,
      `live forecasts  npx stillwell watch --broker ${fleet.broker.url} --site ${runs[0].name} --clock readings`,
    ],
    linger: (signal) => new Promise((resolve) => signal.addEventListener('abort', () => resolve(), { once: true })),
  };
}

const percent = (share: number | null): string => (share === null ? '-' : `${(100 * share).toFixed(1)} %`);

function receivedTable(runs: readonly MoteRun[]): string {
  const rows = runs.flatMap((run) => {
    const score = run.scorer.score(
      UNSEEN,
      run.bundle.bundle.channels.map((channel) => channel.scale),
    );
    if (score === null) return [];
    const rivals = score.rivalMse.map((mse) => percent(1 - score.mse / mse));
    return [
      [
        run.name,
        run.mote.isIndoor ? 'indoor' : 'outdoor',
        String(score.pairs),
        score.mse.toFixed(5),
        ...rivals,
        percent(score.coverage),
      ],
    ];
  });
  const heads = [
    'site',
    'where',
    'pairs',
    'error',
    ...runs[0].scorer.rivals.map((name) => `against ${name}`),
    'coverage',
  ];
  return (
    'Unseen part, forecasts as received over MQTT, five minutes ahead, both signals. Error: squared, in units of the\n' +
    `signal’s variance while learning. Skill: how much less of it than the rival; negative means the rival is better.\n${formatColumns(heads, rows)}`
  );
}

function judgedTable(runs: readonly MoteRun[], judged: readonly Judged[]): string {
  const names = [...new Set(judged.flatMap((one) => Object.keys(one.rivals)))];
  const rows = runs.map((run, i) => [
    run.name,
    judged[i].mse.toFixed(5),
    ...names.map((name) => percent(judged[i].rivals[name]?.skill ?? null)),
    percent(judged[i].coverage),
  ]);
  return `The same by \`stillwell hindcast\`, with the rivals that are fitted:\n${formatColumns(['site', 'error', ...names, 'coverage'], rows)}`;
}
