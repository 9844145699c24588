/**
 * The loop closes: what the desk keeps is, bit for bit, what the gateway's filter saw, over a month with gaps, late and
 * doubled readings, clean stops, power cuts, a change to a bundle of another kind, and a link that loses, doubles and
 * shuffles segments.
 */
import { parseReceiptMessage, SegmentWriter, topicsOf } from '@stillwell/protocol';
import { expect, test } from 'vitest';
import { BundleKeeper } from '../../runtime/bundle/change.ts';
import { Engine } from '../../runtime/engine.ts';
import { readSite } from '../../trainer/desk/archive.ts';
import { Collector, type DeskEvent } from '../../trainer/desk/collect.ts';
import { Shelf } from '../../trainer/desk/shelf.ts';
import { readStatus } from '../../trainer/desk/status.ts';
import { openStore, type Store } from '../../trainer/desk/store/open.ts';
import { testFolder } from '../support/folder.ts';
import { MemoryDisk } from '../support/memory-disk.ts';
import { seededNumbers } from '../support/models.ts';
import {
  Account,
  LATENESS_MS,
  MONTH_SITE,
  MONTH_START,
  monthBundle,
  monthMessages,
  site,
  TICK_MS,
} from '../support/month.ts';
import { trusted } from '../support/running-site.ts';
import { shelfFolder } from '../trainer/desk/shelf-folder.ts';

const TICKS = 30 * 144;
const CHANGE_AT = 15 * 144 + 37;
const first = monthBundle(1, 1, 'linear with all it may have');
const second = monthBundle(8, 2, 'featured with a round');
const topics = topicsOf(site.root, MONTH_SITE);

interface Running {
  engine: Engine;
  keeper: BundleKeeper;
}

function startEngine(disk: MemoryDisk): Running {
  const keeper = new BundleKeeper(disk, 'data', site, trusted);
  const stream = new Uint8Array(8).fill(6);
  const engine = new Engine(
    { site, gateway: 'gw-9', disk, folder: 'data', segmentTicks: 60, spoolBytes: 1e9, stream, note: () => {} },
    keeper,
  );
  return { engine, keeper };
}

function install({ engine, keeper }: Running, sealed: Uint8Array): void {
  const offered = keeper.offer(sealed, engine.serving?.checked ?? null);
  if (offered.outcome !== 'accepted') throw new Error(JSON.stringify(offered));
  engine.install(offered.checked);
  keeper.serves(offered.checked);
}

/** A desk and a link to it that loses a third of the segments and of the receipts, doubles some, and shuffles all. */
class LossyDesk {
  readonly events: DeskEvent[] = [];
  readonly #random = seededNumbers(99);
  readonly #data = testFolder();
  readonly #bundles = shelfFolder([first.document, second.document]);
  #receipts: Uint8Array[] = [];
  store!: Store;
  #collector!: Collector;

  async open(): Promise<void> {
    this.store = await openStore(this.#data);
    this.#collector = new Collector({
      store: this.store,
      shelf: new Shelf(this.store, this.#bundles),
      root: site.root,
      publish: async (_, payload) => void this.#receipts.push(payload),
      onEvent: (event) => this.events.push(event),
    });
    await this.#collector.refresh(true);
  }

  /** Ends and begins again; receipts on their way are lost. */
  async restart(): Promise<void> {
    await this.#collector.settle();
    await this.store.close();
    this.#receipts = [];
    await this.open();
  }

  async exchange(engine: Engine, isLossy: boolean): Promise<void> {
    const sent = engine.spool.waiting
      .filter((one) => one.number < engine.journal!.number)
      .flatMap((one) => {
        const copies = isLossy ? Math.floor(this.#random() * 3) : 1;
        return Array.from({ length: copies }, () => ({ order: this.#random(), bytes: engine.spool.read(one)! }));
      });
    for (const { bytes } of sent.sort((a, b) => a.order - b.order)) this.#collector.offer(topics.segments, bytes);
    await this.#collector.settle();
    for (const payload of this.#receipts.splice(0)) {
      if (isLossy && this.#random() < 0.33) continue;
      const { stream, segments } = parseReceiptMessage(payload);
      const name = Buffer.from(stream).toString('hex');
      for (const { number, hash } of segments) expect(engine.spool.confirm(name, number, hash)).not.toBe('conflict');
    }
  }
}

/** Plays the first `ticks` ticks of the month; gives the account of what the gateway was given, and the desk. */
async function play(ticks: number) {
  const account = new Account();
  const desk = new LossyDesk();
  await desk.open();
  const messages = monthMessages(ticks, 17);
  let disk = new MemoryDisk();
  let running = startEngine(disk);
  install(running, first.sealed);
  for (let n = 0; n < ticks; n++) {
    for (const message of messages[n]!) {
      running.engine.message(message.topic, message.payload, message.timeMs, null);
      account.take(message);
    }
    const nowMs = (MONTH_START + n + 1) * TICK_MS + LATENESS_MS;
    running.engine.close(nowMs);
    running.engine.settle();
    if (running.engine.aligner.nextTick !== null) account.close(running.engine.aligner.nextTick);
    if (n === CHANGE_AT) install(running, second.sealed);
    if (n % 611 === 610) {
      running.engine.stop();
      running = startEngine(disk);
    } else if (n % 611 === 300) {
      // The journal is synced before the cut, as it is every second; what the disk holds is what the next start finds.
      await running.engine.journal!.syncSoon();
      disk = disk.afterPowerCut('nothing');
      running = startEngine(disk);
    }
    if (n % 200 === 199) await desk.exchange(running.engine, true);
    if (n % 1000 === 999) await desk.restart();
  }
  // The last segment closes by a boundary of its own.
  running.engine.journal!.turnOver(running.engine.serving!, running.engine.serving!);
  for (let round = 0; round < 3; round++) await desk.exchange(running.engine, false);
  expect(running.engine.spool.waiting).toHaveLength(0);
  return { account, desk, counters: running.engine.counters };
}

test('a month through gateway and desk: the archive is what the filter saw, bit for bit', {
  timeout: 120_000,
}, async () => {
  const { account, desk } = await play(TICKS);
  const archive = await readSite(desk.store, MONTH_SITE);
  expect(archive.bundles).toHaveLength(2);
  const firstTick = archive.ticks[0]!;
  expect(Array.from(archive.ticks)).toEqual(Array.from(archive.ticks, (_, i) => firstTick + i));
  expect(archive.ticks.at(-1)).toBe(MONTH_START + TICKS - 1);
  let readings = 0;
  let differing = 0;
  archive.channels.forEach((channel, c) => {
    archive.ticks.forEach((tick, i) => {
      const key = `${tick} ${c}`;
      // Sensors of hundredths: the decimal itself is the value.
      const original = (account.original.get(key) ?? Number.NaN) / 100;
      const merged = (account.merged.get(key) ?? Number.NaN) / 100;
      if (!Object.is(channel.original[i], original) || !Object.is(channel.values[i], merged)) differing++;
      if (!Number.isNaN(original)) readings++;
    });
  });
  expect({ differing, readings }).toEqual({ differing: 0, readings: account.original.size });
  expect(archive.corrections).toBeGreaterThan(100);
  const [status] = await readStatus(desk.store);
  expect(status).toMatchObject({ conflicts: 0, broken: 0, waitingForBundle: 0, waitingForPredecessor: 0 });
  expect(status!.doubled).toBeGreaterThan(10);
  await desk.store.close();
});

test('the account differs from the archive as soon as one coded reading is another', { timeout: 120_000 }, async () => {
  const push = SegmentWriter.prototype.push;
  let pushed = 0;
  SegmentWriter.prototype.push = function (lattice, predicted) {
    const altered = lattice.slice();
    if (++pushed === 400 && !Number.isNaN(altered[1]!)) altered[1]!++;
    push.call(this, altered, predicted);
  };
  try {
    const { desk } = await play(720);
    const [status] = await readStatus(desk.store);
    // The replay ends in another state than the gateway's, which the desk sees by itself.
    expect(status!.broken).toBeGreaterThan(0);
    await desk.store.close();
  } finally {
    SegmentWriter.prototype.push = push;
  }
});
