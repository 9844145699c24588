import { describe, expect, it } from 'vitest';
import { DEMO_SITES } from '../../demo-fleet/plants/sites.ts';
import { type ReadingSource, SitePlay } from '../../demo-fleet/play.ts';
import { describeSite } from '../../demo-fleet/site-files.ts';

const description = describeSite(DEMO_SITES[1], 'long');
const WINDOW = 10;
/** Lateness of two ticks, and the tick itself. */
const LAG = 3;

const source = (sent: number[]): ReadingSource => ({
  next: (tick) => {
    sent.push(tick);
    const message = { channel: 0, timeMs: (tick + 1) * 60_000 - 1000, value: 1.5 };
    return { messages: [message], said: Float64Array.of(1.5, 0, 0) };
  },
  drain: () => [{ channel: 1, timeMs: 0, value: 2 }],
});

interface Rig {
  readonly play: SitePlay;
  readonly sent: number[];
  readonly published: { topic: string; payload: string }[];
  answersUpTo: number;
}

/** A play whose gateway answers each tick a moment later, up to `answersUpTo`. */
function rig(options: { answersUpTo: number; failFirst?: number; patienceSeconds?: number }): Rig {
  const sent: number[] = [];
  const published: { topic: string; payload: string }[] = [];
  let failures = options.failFirst ?? 0;
  const made: Rig = {
    sent,
    published,
    answersUpTo: options.answersUpTo,
    play: new SitePlay({
      description,
      source: source(sent),
      firstTick: 1000,
      window: WINDOW,
      patienceSeconds: options.patienceSeconds ?? 5,
      onSaid: () => {},
      publish: async (topic, payload) => {
        if (failures-- > 0) throw new Error('link down');
        published.push({ topic, payload });
        const closes = Math.min(sent[sent.length - 1] - LAG, made.answersUpTo);
        setTimeout(() => made.play.noteClosed(closes), 1);
      },
    }),
  };
  return made;
}

describe('play', () => {
  it('sends every tick once, as the site file says, and ends when all that can close has closed', async () => {
    const made = rig({ answersUpTo: Number.POSITIVE_INFINITY });
    await made.play.playUntil(1100);
    expect(made.sent).toEqual(Array.from({ length: 100 }, (_, k) => 1000 + k));
    expect(made.published[0]).toEqual({
      topic: 'plant/brackwith/level',
      payload: '{"value":1.5,"time":"1970-01-01T16:40:59.000Z"}',
    });
    expect(made.play.closedTick).toBe(1100 - 1 - LAG);
    await made.play.finish();
    expect(made.published.at(-1)?.topic).toBe('plant/brackwith/current');
  });

  it('never runs further ahead of the answers than its window', async () => {
    const made = rig({ answersUpTo: 1010, patienceSeconds: 0.2 });
    await expect(made.play.playUntil(1100)).rejects.toThrow(
      /^brackwith: no forecast for 0\.2 s; sent up to tick 1023, answered up to 1010; see the gateway's log$/,
    );
    expect(Math.max(...made.sent)).toBe(1010 + LAG + WINDOW);
  });

  it('offers a reading again when the link fails, and loses none', async () => {
    const made = rig({ answersUpTo: Number.POSITIVE_INFINITY, failFirst: 2 });
    await made.play.playUntil(1005);
    expect(made.published.length).toBe(5);
  });

  it('ends with the error it is told of', async () => {
    const made = rig({ answersUpTo: 1000 });
    setTimeout(() => made.play.fail(new Error('gateway-brackwith ended by itself')), 20);
    await expect(made.play.playUntil(1100)).rejects.toThrow('gateway-brackwith ended by itself');
  });
});
