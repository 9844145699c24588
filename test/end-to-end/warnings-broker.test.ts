/** Warnings over a real broker: a level climbs to its limit, late subscribers, a restart, a cut, and the end. */
import { parseHealthMessage, parseWarningMessage, topicsOf, type WarningMessage } from '@stillwell/protocol';
import { type Connection, openConnection } from '@stillwell/runtime/mqtt';
import { describe, expect, onTestFinished, test } from 'vitest';
import { systemClock } from '../../runtime/clock.ts';
import { nodeDisk } from '../../runtime/disk.ts';
import { Gateway } from '../../runtime/gateway.ts';
import type { Log } from '../../runtime/log.ts';
import { mosquittoMissing, startAedes, startMosquitto, type TestBroker } from '../support/broker.ts';
import { testFolder } from '../support/folder.ts';
import { FIRST_TICK, plantMessage, SITE_NAME, sealedOf, site, trusted } from '../support/running-site.ts';
import { until } from '../support/until.ts';

const topics = topicsOf(site.root, SITE_NAME);
const quiet: Log = { debug: () => {}, info: () => {}, warn: () => {}, error: () => {} };

function startGateway(broker: TestBroker, data: string): Gateway {
  return new Gateway(
    {
      site,
      gateway: 'g1',
      data,
      broker: { url: broker.url, protocol: 'auto', username: null, password: null, tls: {} },
      trusted,
      clock: 'readings',
      segmentTicks: 60,
      spoolBytes: 1e8,
      healthSeconds: 1,
    },
    { clock: systemClock, disk: nodeDisk, log: quiet, firstRetryMs: 60, willDelaySeconds: 0 },
  );
}

/** A subscriber: everything it hears on the warning's topic, empty payloads as null, and the newest health. */
async function subscriber(broker: TestBroker, name: string) {
  const heard: { message: WarningMessage | null; retained: boolean }[] = [];
  let health: Uint8Array | null = null;
  const connection: Connection = openConnection({
    url: broker.url,
    clientId: name,
    protocol: 'auto',
    onMessage: (topic, payload, { retain }) => {
      if (topic === topics.health) health = payload;
      else heard.push({ message: payload.length === 0 ? null : parseWarningMessage(payload), retained: retain });
    },
  });
  onTestFinished(() => connection.end(true));
  await connection.subscribe([topics.warning('+'), topics.health]);
  return { connection, heard, counters: () => parseHealthMessage(health!).counters };
}

const brokers: readonly (readonly [string, () => Promise<TestBroker>, string | null])[] = [
  ['aedes, MQTT 3.1.1', () => startAedes(), null],
  ['mosquitto, MQTT 5', () => startMosquitto(), mosquittoMissing],
];

describe.each(brokers)('on %s', (_, startBroker, missing) => {
  test.skipIf(missing !== null)(
    'opens once, is there for late comers and after restarts, and goes',
    async () => {
      const broker = await startBroker();
      onTestFinished(() => broker.stop());
      const early = await subscriber(broker, 'early');
      const { connection: plant, heard } = early;
      const data = testFolder();
      let gateway = startGateway(broker, data);
      onTestFinished(() => gateway.abandon());
      await until('connected', () => gateway.isConnected);
      gateway.offerBundle(sealedOf(1), 'by hand');
      let tick = 0;
      /** Levels of the next ticks, one after the other. */
      const play = async (levels: readonly number[]): Promise<void> => {
        for (const level of levels) {
          for (const [channel, value] of [level, 10, 10].entries()) {
            const { topic, payload } = plantMessage(channel, (FIRST_TICK + tick) * 60_000 + 31_000, value);
            await plant.publish({ topic, payload, qos: 1, retain: false });
          }
          tick++;
        }
        await until(`tick ${tick - 2}`, () => gateway.engine.serving?.tick === FIRST_TICK + tick - 2);
      };
      await play(new Array(12).fill(10));
      expect(heard.filter(({ message }) => message !== null)).toEqual([]);

      await play([11, 12, 12.6, 13.2, 13.6, 13.9, 13.95, 13.95]);
      await until('a warning', () => heard.at(-1)?.message?.open === 1);
      const first = heard.find(({ message }) => message !== null)!.message!;
      expect(first.warnings).toMatchObject([
        { limit: 'high', side: 'above', value: 14, status: 'opened', crossed_at: null },
      ]);
      expect(first.warnings[0]!.probability).toBeGreaterThanOrEqual(0.5);
      const { since } = first.warnings[0]!;
      expect(since).toBe(first.origin);
      const late = await subscriber(broker, 'late');
      await until('the retained one', () => late.heard.length > 0);
      expect(late.heard[0]).toMatchObject({ retained: true, message: { open: 1 } });
      await until('health', () => early.counters().warnings_open === 1, 5000);

      // It comes true; then the machine stops in the middle, and starts again.
      await play([14.3, 14.4, 14.4, 14.4]);
      await until('crossed', () => heard.at(-1)?.message?.warnings[0]?.crossed_at !== null);
      await gateway.abandon();
      gateway = startGateway(broker, data);
      heard.length = 0;
      await play([14.4, 14.4, 14.4]);
      await until('said again', () => heard.length > 0);
      expect(heard[0]!.message!.warnings).toMatchObject([{ status: 'updated', since }]);
      expect(heard[0]!.message!.warnings[0]!.crossed_at).not.toBeNull();

      // The level falls: the last word to those who listen, nothing to those who come later.
      await play([13.5, 12.5, 11.5, 10.5, 10, 10, 10, 10, 10, 10, 10, 10]);
      await until('blanked', () => heard.at(-1)?.message === null);
      expect(heard.at(-2)!.message).toMatchObject({ open: 0, warnings: [{ status: 'closed', since }] });
      const opened = heard.filter(({ message }) => message?.warnings.some(({ status }) => status === 'opened'));
      expect(opened).toEqual([]);
      const later = await subscriber(broker, 'later');
      await until('its health', () => later.counters().warnings_open === 0, 5000);
      expect(later.heard).toEqual([]);
      await gateway.stop();
    },
    30_000,
  );
});
