/** Resolution shed under a byte budget, from the gateway's readings to the desk's archive. */
import {
  coarseIndex,
  latticeIndex,
  latticeValue,
  parseHealthMessage,
  parseSite,
  readSegmentHead,
} from '@stillwell/protocol';
import { saveState } from '@stillwell/runtime/filter';
import { expect, test } from 'vitest';
import { BundleKeeper } from '../../runtime/bundle/change.ts';
import { Engine } from '../../runtime/engine.ts';
import { healthPayload } from '../../runtime/publish/health.ts';
import { readSite } from '../../trainer/desk/archive.ts';
import { Chain } from '../../trainer/desk/chain.ts';
import { takeIn } from '../../trainer/desk/intake.ts';
import { Shelf } from '../../trainer/desk/shelf.ts';
import { readStatus } from '../../trainer/desk/status.ts';
import { statusText } from '../../trainer/desk/status-text.ts';
import { openStore } from '../../trainer/desk/store/open.ts';
import { testFolder } from '../support/folder.ts';
import { MemoryDisk } from '../support/memory-disk.ts';
import {
  CHANNELS,
  documentOf,
  FIRST_TICK,
  plantMessages,
  SITE_NAME,
  SITE_TEXT,
  sealedOf,
  trusted,
} from '../support/running-site.ts';
import { shelfFolder } from '../trainer/desk/shelf-folder.ts';

const TICKS = 600;
const SEGMENT = 60;
const plant = plantMessages(TICKS, 5, 0.02);
const tight = parseSite(`${SITE_TEXT}residual_budget: 4000\n`, 'site.yaml');

function start(disk: MemoryDisk, site = tight): Engine {
  const keeper = new BundleKeeper(disk, 'data', site, trusted);
  const options = { gateway: 'g1', folder: 'data', segmentTicks: SEGMENT, spoolBytes: 1e9, note: () => {} };
  const engine = new Engine({ site, disk, stream: new Uint8Array(8).fill(9), ...options }, keeper);
  if (engine.serving !== null) return engine;
  const offered = keeper.offer(sealedOf(1), null);
  if (offered.outcome !== 'accepted') throw new Error(JSON.stringify(offered));
  engine.install(offered.checked);
  keeper.serves(offered.checked);
  return engine;
}

function feed(engine: Engine, from: number, to: number): void {
  for (let n = from; n < to; n++) {
    for (const { topic, payload, timeMs } of plant[n]!) engine.message(topic, payload, timeMs, null);
    engine.close((FIRST_TICK + n + 1) * 60_000 + tight.latenessMs);
    engine.settle();
  }
}

function segmentsOf(disk: MemoryDisk): Uint8Array[] {
  return disk.list('data/spool').map((name) => disk.read(`data/spool/${name}`)!);
}

const disk = new MemoryDisk();
const engine = start(disk);
feed(engine, 0, TICKS);
const segments = segmentsOf(disk);

function bytesOf(list: readonly Uint8Array[]): number {
  return list.slice(1).reduce((sum, { length }) => sum + length, 0);
}

test('later segments are coarser and smaller, and the chain goes on without a start in full', () => {
  const heads = segments.map((bytes) => readSegmentHead(bytes));
  expect(heads).toHaveLength(TICKS / SEGMENT);
  expect([...heads[0]!.coarseness]).toEqual([0, 0, 0]);
  expect(heads.at(-1)!.coarseness.some((power) => power > 1)).toBe(true);
  expect(heads.slice(1).every(({ start: kind }) => kind === 'chained')).toBe(true);
  const roomy = new MemoryDisk();
  feed(start(roomy, parseSite(SITE_TEXT, 'site.yaml')), 0, TICKS);
  const full = segmentsOf(roomy);
  expect(full.every((bytes) => readSegmentHead(bytes).format === 1)).toBe(true);
  // Readings alone: heads are the same but for two bytes.
  expect(bytesOf(segments) - 110 * 9).toBeLessThan(0.7 * (bytesOf(full) - 110 * 9));
});

test('a restart anywhere changes nothing', () => {
  for (const stop of [70, 121, 299]) {
    const first = new MemoryDisk();
    feed(start(first), 0, stop);
    const second = first.afterPowerCut('everything');
    const again = start(second);
    feed(again, stop, TICKS);
    expect(segmentsOf(second)).toEqual(segments);
    const state = ({ serving }: Engine): Uint8Array => saveState(serving!.model, serving!.state);
    expect(state(again)).toEqual(state(engine));
  }
});

test('health says which signals, and how many of their steps are one', () => {
  const health = parseHealthMessage(
    healthPayload({
      site: SITE_NAME,
      gateway: 'g1',
      nowMs: 0,
      wallTickMs: null,
      holdsMs: 1000,
      status: 'running',
      lastChange: null,
      engine,
      ship: { sent: 0, resent: 0, confirmed: 0, conflicts: 0, parked: 0 },
      reconnects: 0,
    }),
  );
  const shed = health.counters.resolution_shed as Record<string, number>;
  expect(Object.keys(shed).length).toBeGreaterThan(0);
  CHANNELS.forEach((name, c) => {
    const power = engine.budget.coarseness[c]!;
    expect(shed[name]).toBe(power === 0 ? undefined : 2 ** power);
  });
  expect(health.counters.segment_bytes_a_day).toBeGreaterThan(1000);
});

test('the desk replays every segment, and knows the resolution of every reading', async () => {
  const store = await openStore(testFolder());
  const shelf = new Shelf(store, shelfFolder([documentOf()]));
  await shelf.refresh();
  await takeIn(
    store,
    segments.map((bytes) => ({ site: SITE_NAME, bytes, atMs: 0 })),
  );
  const events = await new Chain(store, shelf).followAll();
  expect(events.map(({ kind }) => kind)).toEqual(Array(segments.length).fill('decoded'));
  const archive = await readSite(store, SITE_NAME);
  const heads = segments.map((bytes) => readSegmentHead(bytes));
  let coarse = 0;
  archive.channels.forEach(({ name, values, coarseness, lattice }) => {
    const { step, offset } = lattice!;
    const c = CHANNELS.indexOf(name as (typeof CHANNELS)[number]);
    archive.ticks.forEach((tick, i) => {
      const head = heads.find(({ firstTick, ticks }) => tick >= firstTick && tick < firstTick + ticks)!;
      const power = head.coarseness[c]!;
      const sent = plant[tick - FIRST_TICK]!.find(({ topic }) => topic === `plant/${name}`);
      const said = sent === undefined ? Number.NaN : JSON.parse(Buffer.from(sent.payload).toString()).v;
      const index = coarseIndex(latticeIndex(said, step, offset), power);
      expect(values[i], `${name} at ${tick}`).toBe(latticeValue(index, step, offset));
      if (sent !== undefined) expect(coarseness?.[i] ?? 0).toBe(power);
      if (power > 0) coarse++;
    });
  });
  expect(coarse).toBeGreaterThan(500);
  const statuses = await readStatus(store);
  const ticks = heads.filter(({ coarseness }) => coarseness.some((power) => power > 0)).length * SEGMENT;
  expect(statuses[0]!.coarseTicks).toBe(ticks);
  expect(statusText(statuses)).toContain(`${ticks} of ${heads.length * SEGMENT} ticks hold readings coarser`);
  await store.close();
});
