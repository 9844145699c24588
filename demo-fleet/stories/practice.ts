/**
 * A plant to try the commands on: one simulated wet well, its log and site file in the folder, its readings coming in on a
 * broker at the place the README names, half an hour of plant a second. Everything else is left to the person.
 */
import { openConnection } from '@stillwell/runtime/mqtt';
import { startBroker } from '../broker.ts';
import { DEMO_SITES } from '../plants/sites.ts';
import { SiteRun } from '../site-run.ts';
import { HISTORY_DAYS, PLAY_MS, ROUGH } from './season-plan.ts';
import type { Story, StoryContext, StoryResult } from './story.ts';

/** Fixed, so that commands can be pasted; not the standard port, which a broker of the machine may hold. */
const PORT = 18830;
const TICKS_A_SECOND = 30;
const BEATS_A_SECOND = 5;
const CONNECT_TIMEOUT_MS = 15_000;

/** The story. */
export const practice: Story = {
  name: 'practice',
  summary: `one wet well to try every command on: log, site file and live readings on port ${PORT}; runs until Ctrl-C`,
  staysOpen: true,
  play,
};

async function play(context: StoryContext): Promise<StoryResult> {
  const broker = await startBroker(PORT).catch((cause: Error) => {
    throw new Error(
      `port ${PORT} of 127.0.0.1 cannot be opened (${cause.message}); end what holds it, then start again`,
    );
  });
  const site = new SiteRun({
    site: DEMO_SITES[0],
    habit: 'wide-utc',
    seed: context.seed,
    playMs: PLAY_MS,
    historyDays: HISTORY_DAYS,
    faults: [],
    roughness: ROUGH,
  });
  site.writeFiles(context.folder);
  return {
    report: `${site.name}: ${HISTORY_DAYS} days of log and site.yaml are in ${context.folder}; readings come in on ${broker.url}.`,
    verdicts: [],
    figures: { broker: broker.url, site: site.siteFile, history: site.historyFiles },
    lookAt: ['the four jobs in README.md, in another terminal'],
    linger: async (signal) => {
      const connection = openConnection({
        url: broker.url,
        clientId: 'practice-plant',
        protocol: 4,
        onMessage: () => {},
      });
      try {
        await connection.firstConnect(CONNECT_TIMEOUT_MS);
        await comeIn(site, (topic, payload) => connection.publish({ topic, payload, qos: 1, retain: false }), signal);
      } finally {
        await connection.end();
        await broker.stop();
      }
    },
  };
}

/** Sends readings at a steady pace, whether anybody listens or not. */
async function comeIn(
  site: SiteRun,
  publish: (topic: string, payload: string) => Promise<void>,
  signal: AbortSignal,
): Promise<void> {
  const play = site.open(publish);
  while (!signal.aborted) {
    const until = play.tick + TICKS_A_SECOND / BEATS_A_SECOND;
    play.noteClosed(until);
    await play.playUntil(until);
    await new Promise((resolve) => setTimeout(resolve, 1000 / BEATS_A_SECOND));
  }
}
