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
import { type SealedBundle, Workshop } from '../workshop.ts';
import type { Story, StoryContext, StoryResult } from './story.ts';

/** Readings of the learned part that are replayed first, to warm the filter. */
const WARM_READINGS = 600;
const SEGMENT_TICKS = 240;
const WINDOW = 48;
const PATIENCE_SECONDS = 40;
const SETTLE_SECONDS = 30;
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
      fleet.untilHealth(run.name, 'a gateway that serves', (h) => h.status === 'warming' || h.status === 'running', 30),
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
    [median, lower, upper].forEach((part, row) => path.set(part, (i * 3 + row) * MOTE_HORIZON));
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

/** One rival's skill, by the trainer's own judge on the unseen part. */
interface Judged {
  readonly name: string;
  readonly rows: readonly (readonly string[])[];
}

/** Has the trainer judge the same bundle on the same unseen part, which adds the rivals that have to be fitted. */
async function hindcast(folder: string, fleet: Fleet, run: MoteRun): Promise<Judged> {
  const history = writeMoteHistory(
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
    ...['--history', history],
    ...['--from', from],
    '--json',
  ]);
  return { name: run.name, rows: skillRows(run.name, JSON.parse(text)) };
}
