/** Receipts follow the commit and nothing else; over real brokers of both protocol versions. */

import { writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { parseReceiptMessage, segmentHash, topicsOf } from '@stillwell/protocol';
import { openConnection } from '@stillwell/runtime/mqtt';
import { sql } from 'kysely';
import { describe, expect, onTestFinished, test } from 'vitest';
import { readArchive } from '../../../trainer/desk/archive.ts';
import { Collector, type DeskEvent } from '../../../trainer/desk/collect.ts';
import { type RunEvent, startDesk } from '../../../trainer/desk/run.ts';
import { Shelf } from '../../../trainer/desk/shelf.ts';
import { openArchive, openStore, writeMeta } from '../../../trainer/desk/store/open.ts';
import { mosquittoMissing, startAedes, startMosquitto, type TestBroker } from '../../support/broker.ts';
import { testFolder } from '../../support/folder.ts';
import { syntheticReadings } from '../../support/models.ts';
import { SegmentMaker, sealableBundle } from '../../support/segment-maker.ts';
import { shelfFolder } from './shelf-folder.ts';

const SITE = 'wet-well-3';
const TOPICS = topicsOf('stillwell', SITE);
const bundle = sealableBundle({ site: SITE, seed: 4 });

function madeSegments(count: number): SegmentMaker {
  const maker = new SegmentMaker(SITE, 'gw-3', bundle.document, bundle.model);
  syntheticReadings(bundle.model, count * 20, 5, 0.05).forEach((row, i) => {
    maker.tick(500 + i, row);
    if (i % 20 === 19) maker.close();
  });
  return maker;
}

async function deskInside(publish: (payload: Uint8Array) => Promise<void>) {
  const store = await openStore(testFolder());
  const shelf = new Shelf(store, shelfFolder([bundle.document]));
  const events: DeskEvent[] = [];
  const collector = new Collector({
    store,
    shelf,
    root: 'stillwell',
    publish: (_, payload) => publish(payload),
    onEvent: (event) => events.push(event),
    now: () => 1_800_000_000_000,
  });
  await collector.refresh(true);
  return { store, collector, events };
}

test('a receipt is published only when another reader of the file sees the segment', async () => {
  const seen: number[] = [];
  const desk = await deskInside(async (payload) => {
    const reader = await openArchive(desk.store.folder);
    const { segments } = parseReceiptMessage(payload);
    for (const { number, hash } of segments) {
      const row = await reader.db.selectFrom('segments').select('hash').where('number', '=', number).executeTakeFirst();
      expect(row && Buffer.from(new Uint8Array(row.hash)).equals(hash)).toBe(true);
      seen.push(number);
    }
    await reader.close();
  });
  for (const { bytes } of madeSegments(5).made) desk.collector.offer(TOPICS.segments, bytes);
  await desk.collector.settle();
  expect(seen).toEqual([0, 1, 2, 3, 4]);
  expect(desk.events.filter((event) => event.event === 'receipt-lost')).toEqual([]);
  await desk.store.close();
});

test('what the store cannot keep is not receipted', async () => {
  let receipts = 0;
  const desk = await deskInside(async () => {
    receipts++;
  });
  await desk.store.db.schema.dropTable('segments').execute();
  desk.collector.offer(TOPICS.segments, madeSegments(1).made[0]!.bytes);
  await desk.collector.settle();
  expect(receipts).toBe(0);
  expect(desk.events).toContainEqual(expect.objectContaining({ event: 'not-kept', dropped: 1 }));
  await desk.store.close();
});

test('a damaged segment gets no receipt; one of an unknown bundle does; a conflict names the hash that is held', async () => {
  const receipts: { number: number; hash: Uint8Array }[] = [];
  const desk = await deskInside(async (payload) => {
    receipts.push(...parseReceiptMessage(payload).segments);
  });
  const [first] = madeSegments(1).made;
  const damaged = first!.bytes.slice();
  damaged[20]! ^= 4;
  const strange = sealableBundle({ site: SITE, seed: 9 });
  const stranger = new SegmentMaker(SITE, 'gw-3', strange.document, strange.model, 7);
  stranger.tick(1, Float64Array.of(10, 13));
  stranger.close();
  const clone = new SegmentMaker(SITE, 'gw-3', bundle.document, bundle.model);
  clone.tick(1, Float64Array.of(10, 13));
  clone.close();
  for (const bytes of [damaged, first!.bytes, stranger.made[0]!.bytes, clone.made[0]!.bytes]) {
    desk.collector.offer(TOPICS.segments, bytes);
    await desk.collector.settle();
  }
  expect(receipts.map(({ hash }) => Buffer.from(hash).toString('hex'))).toEqual(
    [first!.bytes, stranger.made[0]!.bytes, first!.bytes].map((bytes) =>
      Buffer.from(segmentHash(bytes)).toString('hex'),
    ),
  );
  expect(desk.events.find((event) => event.event === 'segment' && event.kind === 'conflict')).toBeDefined();
  await desk.store.close();
});

test('a receipt that is lost is given again when the gateway sends again', async () => {
  let isDown = true;
  const receipts: number[] = [];
  const desk = await deskInside(async (payload) => {
    if (isDown) throw new Error('link down');
    receipts.push(...parseReceiptMessage(payload).segments.map((one) => one.number));
  });
  const [first] = madeSegments(1).made;
  desk.collector.offer(TOPICS.segments, first!.bytes);
  await desk.collector.settle();
  isDown = false;
  desk.collector.offer(TOPICS.segments, first!.bytes);
  await desk.collector.settle();
  expect(receipts).toEqual([0]);
  expect(desk.events.filter((event) => event.event === 'receipt-lost')).toHaveLength(1);
  await desk.store.close();
});

const brokers: readonly (readonly [string, () => Promise<TestBroker>, string | null])[] = [
  ['aedes (MQTT 3.1.1)', () => startAedes(), null],
  ['mosquitto (MQTT 5)', () => startMosquitto(), mosquittoMissing],
];

describe.each(brokers)('over %s', (_, start, missing) => {
  test.skipIf(missing !== null)('segments go in, receipts come out, the readings are exact', async () => {
    const broker = await start();
    onTestFinished(() => broker.stop());
    const data = testFolder();
    const events: RunEvent[] = [];
    const desk = await startDesk({
      data,
      broker: broker.url,
      bundles: shelfFolder([bundle.document]),
      root: 'stillwell',
      onEvent: (event) => events.push(event),
    });
    const maker = madeSegments(6);
    const receipted = new Set<number>();
    let done: () => void = () => {};
    const all = new Promise<void>((resolve) => {
      done = resolve;
    });
    const gateway = openConnection({
      url: broker.url,
      clientId: 'gw-3',
      protocol: 'auto',
      onMessage: (_topic, payload) => {
        for (const { number } of parseReceiptMessage(payload).segments) receipted.add(number);
        if (receipted.size === maker.made.length) done();
      },
    });
    await gateway.firstConnect(5000);
    await gateway.subscribe([TOPICS.receipts]);
    for (const { bytes } of [...maker.made].reverse()) {
      await gateway.publish({ topic: TOPICS.segments, payload: bytes, qos: 1, retain: false });
    }
    await all;
    await gateway.end();
    await desk.stop();
    const archive = await readArchive(data, SITE);
    expect(archive.ticks).toHaveLength(120);
    expect(archive.segments).toBe(6);
    const kinds = events.flatMap((event) => (event.event === 'connection' ? [event.state] : []));
    expect(kinds[0]).toBe('connected');
  });
});

test('a folder held by a living process is refused; one left by a dead process is taken over', async () => {
  const folder = testFolder();
  writeFileSync(join(folder, 'desk.lock'), String(process.ppid));
  await expect(openStore(folder)).rejects.toThrow(/in use by another desk/);
  writeFileSync(join(folder, 'desk.lock'), '4194304999');
  const store = await openStore(folder);
  await store.close();
});

test('a store of a newer program, and a file that is no store, are refused in one sentence', async () => {
  const folder = testFolder();
  const store = await openStore(folder);
  await writeMeta(store.db, 'schema', '99');
  await store.close();
  await expect(openStore(folder)).rejects.toThrow(/newer program/);
  const other = testFolder();
  writeFileSync(
    join(other, 'desk.db'),
    'this is no database, only text that is long enough to be read as one'.repeat(40),
  );
  await expect(openStore(other)).rejects.toThrow(/cannot be opened as a desk's store/);
});

test('the broker being down is one sentence that says what to check, and the folder is free again', async () => {
  const data = testFolder();
  const options = { data, broker: 'mqtt://127.0.0.1:1', bundles: null, root: 'stillwell', onEvent: () => {} };
  await expect(startDesk(options)).rejects.toThrow(/connection refused.*check address and port/);
  await expect(startDesk({ ...options, bundles: join(data, 'none') })).rejects.toThrow(
    /expected a folder of sealed bundles/,
  );
  await (await openStore(data)).close();
});

test('a flood of empty messages meets the limit of memory, and is told', async () => {
  const desk = await deskInside(async () => undefined);
  await desk.store.db.schema.dropTable('refusals').execute();
  const offered = 200_000;
  for (let i = 0; i < offered; i++) desk.collector.offer(TOPICS.segments, new Uint8Array(0));
  expect(desk.collector.waiting).toBeLessThan(140_000);
  await desk.collector.settle();
  const dropped = desk.events.flatMap((event) => (event.event === 'not-kept' ? [event.dropped] : []));
  expect(dropped.reduce((sum, count) => sum + count, 0)).toBe(offered);
  await desk.store.close();
});

test('one segment that cannot be decoded holds up no other stream, and is tried again after a while', async () => {
  const store = await openStore(testFolder());
  const events: DeskEvent[] = [];
  let nowMs = 1_800_000_000_000;
  const collector = new Collector({
    store,
    shelf: new Shelf(store, shelfFolder([bundle.document])),
    root: 'stillwell',
    publish: async () => undefined,
    onEvent: (event) => events.push(event),
    now: () => nowMs,
  });
  await collector.refresh(true);
  // A span of this tick cannot be stored: stands in for a disk that fails at one segment.
  await sql`CREATE TRIGGER jam BEFORE INSERT ON spans WHEN NEW.first_tick = 7 BEGIN SELECT RAISE(ABORT, 'jammed'); END`.execute(
    store.db,
  );
  const jammed = new SegmentMaker(SITE, 'gw-1', bundle.document, bundle.model, 11);
  jammed.tick(7, Float64Array.of(10, 13));
  jammed.close();
  for (const { bytes } of [...jammed.made, ...madeSegments(1).made]) collector.offer(TOPICS.segments, bytes);
  await collector.settle();
  const decoded = (): string[] =>
    events.flatMap((event) => (event.event === 'chain' && event.kind === 'decoded' ? [event.gateway] : []));
  expect(decoded()).toEqual(['gw-3']);
  expect(events).toContainEqual({ event: 'failed', message: expect.stringContaining('jammed') });
  await sql`DROP TRIGGER jam`.execute(store.db);
  await collector.refresh();
  expect(decoded()).toEqual(['gw-3']);
  nowMs += 60_000;
  await collector.refresh();
  expect(decoded()).toEqual(['gw-3', 'gw-1']);
  await store.close();
});

test('a store that fails is not taken for a bundle that is none; the file is read again', async () => {
  const store = await openStore(testFolder());
  const shelf = new Shelf(store, shelfFolder([bundle.document]));
  await sql`ALTER TABLE bundles RENAME TO aside`.execute(store.db);
  await expect(shelf.refresh()).rejects.toThrow(/bundles/);
  await sql`ALTER TABLE aside RENAME TO bundles`.execute(store.db);
  const { added, refused } = await shelf.refresh();
  expect(added).toHaveLength(1);
  expect(refused).toEqual([]);
  await store.close();
});
