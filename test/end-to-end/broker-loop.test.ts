/** The loop over a real broker: roll a bundle out, run, restart both ends, change the bundle, and compare the readings. */
import { copyFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { createKeyPair, openSealed, readEnvelope, sealBundle, toHex } from '@stillwell/protocol';
import { openConnection } from '@stillwell/runtime/mqtt';
import { describe, expect, onTestFinished, test } from 'vitest';
import { systemClock } from '../../runtime/clock.ts';
import { nodeDisk } from '../../runtime/disk.ts';
import { Gateway } from '../../runtime/gateway.ts';
import type { Log } from '../../runtime/log.ts';
import { readArchive } from '../../trainer/desk/archive.ts';
import { rollBundle } from '../../trainer/desk/roll.ts';
import { type RunEvent, startDesk } from '../../trainer/desk/run.ts';
import { readStatus } from '../../trainer/desk/status.ts';
import { followSite } from '../../trainer/desk/watch.ts';
import type { WatchedSite } from '../../trainer/desk/watch-view.ts';
import { mosquittoMissing, startAedes, startMosquitto, type TestBroker } from '../support/broker.ts';
import { testFolder } from '../support/folder.ts';
import { CHANNELS, FIRST_TICK, plantMessages, SITE_NAME, sealedOf, site, trusted } from '../support/running-site.ts';
import { until } from '../support/until.ts';

const TICKS = 240;
const plant = plantMessages(TICKS + 2);
const FIRST = sealedOf(1);
const SECOND = sealedOf(2, { seed: 5 });

function rolling(broker: string, sealed: Uint8Array) {
  const envelope = readEnvelope(sealed);
  const { digest, sequence } = envelope;
  return { broker, root: 'stillwell', site: SITE_NAME, sealed, digest: toHex(digest), sequence, waitMs: 10_000 };
}

function startGateway(broker: string, data: string): Gateway {
  const log: Log = { debug: () => {}, info: () => {}, warn: () => {}, error: () => {} };
  return new Gateway(
    {
      site,
      gateway: 'g1',
      data,
      broker: { url: broker, protocol: 'auto', username: null, password: null, tls: {} },
      trusted,
      clock: 'readings',
      segmentTicks: 20,
      spoolBytes: 1e8,
      healthSeconds: 60,
    },
    { clock: systemClock, disk: nodeDisk, log, firstRetryMs: 60, willDelaySeconds: 0 },
  );
}

const brokers: readonly (readonly [string, () => Promise<TestBroker>, string | null])[] = [
  ['aedes, MQTT 3.1.1', () => startAedes(), null],
  ['mosquitto, MQTT 5', () => startMosquitto(), mosquittoMissing],
];

describe.each(brokers)('on %s', (_, start, missing) => {
  test.skipIf(missing !== null)(
    'roll, run, restart, change, collect: the archive is what the plant sent',
    async () => {
      const broker = await start();
      onTestFinished(() => broker.stop());
      const { url } = broker;
      const data = testFolder();
      const deskData = testFolder();
      const bundles = testFolder();
      writeFileSync(join(bundles, 'first.swb'), FIRST);
      const events: RunEvent[] = [];
      const openDesk = () =>
        startDesk({
          data: deskData,
          broker: url,
          bundles,
          root: 'stillwell',
          onEvent: (e) => events.push(e),
          bundleCheckMs: 50,
        });
      let desk = await openDesk();
      let gateway = startGateway(url, data);
      const plc = openConnection({ url, clientId: 'plc', protocol: 'auto' });
      await plc.firstConnect(5000);
      const play = async (from: number, to: number): Promise<void> => {
        await until('gateway connected', () => gateway.isConnected);
        for (const { topic, payload } of plant.slice(from, to).flat()) {
          await plc.publish({ topic, payload, qos: 1, retain: false });
        }
        await until(`tick ${to - 2}`, () => (gateway.engine.aligner.nextTick ?? 0) >= FIRST_TICK + to - 2);
      };
      expect(await rollBundle(rolling(url, FIRST))).toMatchObject({ outcome: 'serving', gateway: 'g1' });
      let seen: WatchedSite | null = null;
      const watching = await followSite({
        broker: url,
        root: 'stillwell',
        site: SITE_NAME,
        onChange: (site) => {
          seen = site;
        },
        onTrouble: (text) => expect.unreachable(text),
      });
      await play(0, 90);
      await until('forecasts of both signals', () => seen?.forecasts.size === 2 && seen.state !== null);
      await watching.stop();
      await gateway.stop();
      gateway = startGateway(url, data);
      await play(90, 120);

      const stranger = sealBundle(openSealed(SECOND, trusted).document, { epoch: 1, sequence: 3 }, [createKeyPair()]);
      const refused = await rollBundle(rolling(url, stranger));
      expect(refused).toMatchObject({ outcome: 'refused', reason: expect.stringContaining('signature') });
      expect(await rollBundle(rolling(url, SECOND))).toMatchObject({ outcome: 'serving' });
      await play(120, 180);
      await until('a segment waits for its bundle', () =>
        events.some((event) => event.event === 'chain' && event.reason === 'bundle'),
      );
      await desk.stop();
      await play(180, 230);
      desk = await openDesk();
      writeFileSync(join(bundles, '.part'), SECOND);
      copyFileSync(join(bundles, '.part'), join(bundles, 'second.swb'));
      await play(230, TICKS);
      await until('all sent segments are confirmed', () => gateway.engine.spool.waiting.length === 0, 15_000);
      // The folder of bundles is looked through again every two seconds; what waited is decoded after that.
      let status = (await readStatus(desk.store))[0];
      for (let tries = 0; status?.waitingForBundle !== 0 && tries < 100; tries++) {
        await new Promise((resolve) => setTimeout(resolve, 100));
        await desk.collector.settle();
        status = (await readStatus(desk.store))[0];
      }
      await gateway.stop();
      await plc.end();
      await desk.stop();
      expect(status).toMatchObject({ conflicts: 0, broken: 0, waitingForBundle: 0, waitingForPredecessor: 0 });
      await expectPlant(deskData);
    },
    60_000,
  );
});

/** Every reading the plant sent in the ticks archived, and nothing else. */
async function expectPlant(deskData: string): Promise<void> {
  const archive = await readArchive(deskData, SITE_NAME);
  expect(archive.bundles).toHaveLength(2);
  expect(archive.ticks.length).toBeGreaterThanOrEqual(TICKS - 24);
  expect(archive.ticks[0]).toBe(FIRST_TICK);
  const sent = archive.channels.map(() => new Float64Array(archive.ticks.length).fill(Number.NaN));
  plant.slice(0, archive.ticks.length).forEach((messages, n) => {
    for (const { topic, payload } of messages) {
      sent[CHANNELS.findIndex((name) => topic === `plant/${name}`)]![n] = JSON.parse(Buffer.from(payload).toString()).v;
    }
  });
  expect(archive.channels.map((channel) => channel.original)).toEqual(sent);
}
