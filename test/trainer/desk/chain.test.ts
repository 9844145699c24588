/** Segments in, exact readings out: order, duplicates, conflicts, unknown bundles and broken chains. */
import { writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { latticeValue } from '@stillwell/protocol';
import { sql } from 'kysely';
import { expect, test } from 'vitest';
import { type Archive, readSite } from '../../../trainer/desk/archive.ts';
import { Chain } from '../../../trainer/desk/chain.ts';
import { DeskCounts } from '../../../trainer/desk/event-text.ts';
import { takeIn } from '../../../trainer/desk/intake.ts';
import { Shelf } from '../../../trainer/desk/shelf.ts';
import { readStatus } from '../../../trainer/desk/status.ts';
import { statusText } from '../../../trainer/desk/status-text.ts';
import { openStore, type Store } from '../../../trainer/desk/store/open.ts';
import { testFolder } from '../../support/folder.ts';
import { syntheticReadings } from '../../support/models.ts';
import { SegmentMaker, sealableBundle } from '../../support/segment-maker.ts';
import { shelfFolder } from './shelf-folder.ts';

const SITE = 'pump-7';
const first = sealableBundle({ site: SITE, seed: 1 });
const second = sealableBundle({ site: SITE, seed: 2, order: 5 });
const START = 28_000_000;

/** Four segments of the first bundle, late readings in the third, then two of the second. */
function madeUp(): SegmentMaker {
  const maker = new SegmentMaker(SITE, 'gw-1', first.document, first.model);
  const rows = syntheticReadings(first.model, 300, 7, 0.1);
  for (let i = 0; i < 200; i++) {
    maker.tick(START + i, rows[i]!);
    if (i === 120) maker.correct(START + 30, 1, 1234);
    if (i === 121) maker.correct(START + 5, 0, -77);
    if (i % 50 === 49) maker.restart();
  }
  maker.change(second.document, second.model, START + 150, rows.slice(150, 200));
  for (let i = 200; i < 300; i++) {
    maker.tick(START + i, rows[i]!);
    if (i % 50 === 49) maker.close();
  }
  return maker;
}

async function openDesk(folder: string, bundles: readonly Uint8Array[] = [first.document, second.document]) {
  const store = await openStore(folder);
  const bundleFolder = shelfFolder(bundles);
  const shelf = new Shelf(store, bundleFolder);
  await shelf.refresh();
  return { store, shelf, bundleFolder, chain: new Chain(store, shelf) };
}

async function deliver(desk: { store: Store; chain: Chain }, segments: readonly Uint8Array[]) {
  const outcomes = await takeIn(
    desk.store,
    segments.map((bytes) => ({ site: SITE, bytes, atMs: 1_800_000_000_000 })),
  );
  const events = [];
  for (const outcome of outcomes)
    if (outcome.kind === 'stored') events.push(...(await desk.chain.follow(outcome.name)));
  return { outcomes, events };
}

/** Every tick and value against what the maker was fed. */
function expectExact(archive: Archive, maker: SegmentMaker): void {
  expect(Array.from(archive.ticks)).toEqual([...maker.ticks].sort((a, b) => a - b));
  archive.channels.forEach((channel, c) => {
    const value = (seen: Map<string, number>, tick: number): number =>
      latticeValue(seen.get(`${tick} ${c}`) ?? Number.NaN, channel.lattice!.step, channel.lattice!.offset);
    expect(Array.from(channel.original)).toEqual(Array.from(archive.ticks, (tick) => value(maker.original, tick)));
    expect(Array.from(channel.values)).toEqual(Array.from(archive.ticks, (tick) => value(maker.corrected, tick)));
  });
}

test('segments in order give the readings back exactly, through a restart and a change of bundle', async () => {
  const desk = await openDesk(testFolder());
  const maker = madeUp();
  const { outcomes, events } = await deliver(
    desk,
    maker.made.map((one) => one.bytes),
  );
  expect(outcomes.map((one) => one.kind)).toEqual(Array(6).fill('stored'));
  expect(events.map((one) => one.kind)).toEqual(Array(6).fill('decoded'));
  const archive = await readSite(desk.store, SITE);
  expectExact(archive, maker);
  expect(archive.corrections).toBe(2);
  expect(archive.bundles).toHaveLength(2);
  await desk.store.close();
});

test('what is newer than a tick is read alone, late readings included, and found by the index', async () => {
  const desk = await openDesk(testFolder());
  const maker = madeUp();
  await deliver(
    desk,
    maker.made.map((one) => one.bytes),
  );
  const whole = await readSite(desk.store, SITE);
  const since = whole.ticks[70]!;
  const part = await readSite(desk.store, SITE, since);
  expect(part.segments).toBeLessThan(whole.segments);
  const from = whole.ticks.indexOf(part.ticks[0]!);
  expect(whole.ticks[from]).toBeLessThanOrEqual(since);
  part.channels.forEach((channel, c) => {
    const same = (values: Float64Array): number[] => Array.from(values.slice(70));
    expect(Array.from(channel.values.slice(70 - from))).toEqual(same(whole.channels[c]!.values));
    expect(Array.from(channel.original.slice(70 - from))).toEqual(same(whole.channels[c]!.original));
  });
  const end = whole.ticks.at(-1)! + 1;
  await expect(readSite(desk.store, SITE, end)).rejects.toThrow(
    /no readings .* newer .* the archive ends where they do/,
  );
  await expect(readSite(desk.store, SITE, end + 7)).rejects.toThrow(/the archive ends 7 ticks before them/);
  const plan = await sql<{ detail: string }>`EXPLAIN QUERY PLAN SELECT * FROM spans
    WHERE site = ${SITE} AND spans.first_tick + spans.ticks > ${since}`.execute(desk.store.db);
  expect(plan.rows.map(({ detail }) => detail).join()).toContain('spans_end');
  await desk.store.close();
});

test('a wrong lattice number would be seen: the comparison itself can fail', async () => {
  const desk = await openDesk(testFolder());
  const maker = madeUp();
  await deliver(
    desk,
    maker.made.map((one) => one.bytes),
  );
  const key = `${START + 42} 0`;
  maker.original.set(key, (maker.original.get(key) ?? 0) + 1);
  const archive = await readSite(desk.store, SITE);
  expect(() => expectExact(archive, maker)).toThrow();
  await desk.store.close();
});

test('a segment before its predecessor waits and is decoded when that one comes', async () => {
  const desk = await openDesk(testFolder());
  const maker = madeUp();
  const [one, two, three, ...rest] = maker.made.map((made) => made.bytes);
  const early = await deliver(desk, [three!, two!]);
  expect(early.events.map((event) => `${event.number} ${event.kind} ${event.reason}`)).toEqual([
    '2 waiting predecessor',
    '1 waiting predecessor',
  ]);
  const waiting = await readStatus(desk.store);
  expect(waiting[0]).toMatchObject({
    segments: 2,
    waitingForPredecessor: 2,
    waitsFor: [expect.stringContaining('segment 0')],
  });
  const late = await deliver(desk, [one!]);
  expect(late.events.map((event) => `${event.number} ${event.kind}`)).toEqual(['0 decoded', '1 decoded', '2 decoded']);
  await deliver(desk, rest);
  expectExact(await readSite(desk.store, SITE), maker);
  await desk.store.close();
});

test('the same bytes twice are one segment; other bytes under the same number are set aside and flagged', async () => {
  const desk = await openDesk(testFolder());
  const maker = madeUp();
  const bytes = maker.made[0]!.bytes;
  const other = new SegmentMaker(SITE, 'gw-1', first.document, first.model);
  other.tick(START, Float64Array.of(11, 12));
  other.close();
  const { outcomes } = await deliver(desk, [bytes, bytes, other.made[0]!.bytes, bytes]);
  expect(outcomes.map((one) => one.kind)).toEqual(['stored', 'copy', 'conflict', 'copy']);
  const [status] = await readStatus(desk.store);
  expect(status).toMatchObject({ segments: 1, doubled: 2, conflicts: 1 });
  expect((await readSite(desk.store, SITE)).ticks).toHaveLength(50);
  await desk.store.close();
});

test('a segment of an unknown bundle is kept and decoded as soon as the bundle is there', async () => {
  const folder = testFolder();
  const desk = await openDesk(folder, [first.document]);
  const maker = madeUp();
  const { outcomes, events } = await deliver(
    desk,
    maker.made.map((one) => one.bytes),
  );
  expect(outcomes.every((one) => one.kind === 'stored')).toBe(true);
  expect(events.filter((event) => event.reason === 'bundle').map((event) => event.number)).toEqual([4, 5]);
  expect((await readStatus(desk.store))[0]).toMatchObject({ waitingForBundle: 2, waitingForPredecessor: 0 });
  writeFileSync(join(desk.bundleFolder, 'later.swc'), second.document);
  const { added } = await desk.shelf.refresh();
  const decoded = await desk.chain.followAll(added);
  expect(decoded.map((event) => `${event.number} ${event.kind}`)).toEqual(['4 decoded', '5 decoded']);
  expectExact(await readSite(desk.store, SITE), maker);
  await desk.store.close();
});

test('a chain from another past is broken, said so, and goes on at the next keyed segment', async () => {
  const desk = await openDesk(testFolder());
  const maker = madeUp();
  const impostor = new SegmentMaker(SITE, 'gw-1', first.document, first.model);
  impostor.tick(START - 3, Float64Array.of(9, 9));
  impostor.close();
  const { events } = await deliver(desk, [impostor.made[0]!.bytes, ...maker.made.slice(1).map((one) => one.bytes)]);
  expect(events.map((event) => `${event.number} ${event.kind}`)).toEqual([
    '0 decoded',
    '1 broken',
    '2 broken',
    '3 broken',
    '4 decoded',
    '5 decoded',
  ]);
  expect(events[1]!.reason).toContain('start state');
  expect(events[2]!.reason).toContain('follows segment 1, which is broken');
  const [status] = await readStatus(desk.store);
  expect(status).toMatchObject({ broken: 3 });
  await desk.store.close();
});

test('a damaged segment, and one of another site, are refused and counted', async () => {
  const desk = await openDesk(testFolder());
  const bytes = madeUp().made[0]!.bytes;
  const damaged = bytes.slice();
  damaged[damaged.length >> 1]! ^= 1;
  const elsewhere = new SegmentMaker('other-site', 'gw-1', first.document, first.model);
  elsewhere.tick(START, Float64Array.of(10, 13));
  elsewhere.close();
  const { outcomes } = await deliver(desk, [damaged, bytes.subarray(0, bytes.length - 3), elsewhere.made[0]!.bytes]);
  expect(outcomes.map((one) => (one.kind === 'refused' ? one.cause : one.kind))).toEqual([
    'damaged',
    'damaged',
    'site',
  ]);
  const [status] = await readStatus(desk.store);
  expect(status).toMatchObject({ segments: 0, refused: 3 });
  await desk.store.close();
});

test('a segment of a clock far outside the calendar is decoded and told of, and stops no status', async () => {
  const desk = await openDesk(testFolder());
  const maker = new SegmentMaker(SITE, 'gw-9', first.document, first.model);
  maker.tick(2 ** 52, Float64Array.of(Number.NaN, 13));
  maker.close();
  await deliver(desk, [maker.made[0]!.bytes]);
  const statuses = await readStatus(desk.store);
  // No residual yet is not the same as a residual of 0.
  expect(statuses[0]!.residuals[0]).toMatchObject({ count: 0, bias: null, sdRatio: null });
  expect(statusText(statuses)).toContain('outside the calendar');
  await desk.store.close();
});

test('the first reading of a channel is no residual: there was no forecast of it', async () => {
  const desk = await openDesk(testFolder());
  const maker = new SegmentMaker(SITE, 'gw-1', first.document, first.model);
  const rows = syntheticReadings(first.model, 3, 7, 0);
  for (const [i, row] of rows.entries()) maker.tick(START + i, row);
  maker.close();
  await deliver(desk, [maker.made[0]!.bytes]);
  expect((await readStatus(desk.store))[0]!.residuals.map((one) => one.count)).toEqual(
    first.bundle.channels.filter((channel) => channel.role === 'signal').map(() => 2),
  );
  await desk.store.close();
});

test('bits per reading count the segments that the readings came from, not those that wait', async () => {
  const counts = new DeskCounts();
  const place = { site: SITE, gateway: 'gw-1', stream: '00', number: 1 };
  const name = { ...place, hash: new Uint8Array(32) };
  counts.count({ event: 'segment', kind: 'stored', name, ticks: 60, size: 5000 }, 0);
  counts.count({ event: 'chain', kind: 'waiting', ...place, readings: null, size: 5000, reason: 'bundle' }, 0);
  counts.count({ event: 'chain', kind: 'decoded', ...place, readings: 100, size: 50, reason: null }, 0);
  expect(counts.line()).toContain('100 readings, 4.00 bits/reading');
});
