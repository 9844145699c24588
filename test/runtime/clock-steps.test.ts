/** The engine under a wall clock that steps: what was stamped, forecast and recorded. */
import { parseSite, readSegmentHead } from '@stillwell/protocol';
import { saveBounds, saveState } from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { BundleKeeper } from '../../runtime/bundle/change.ts';
import { ClockWatch } from '../../runtime/clock-watch.ts';
import { Engine } from '../../runtime/engine.ts';
import { SteadyClock } from '../../runtime/steady-clock.ts';
import { FakeClock } from '../support/fake-clock.ts';
import { MemoryDisk } from '../support/memory-disk.ts';
import { FIRST_TICK, plantMessages, SITE_NAME, SITE_TEXT, sealedOf, site, trusted } from '../support/running-site.ts';

const TICKS = 120;
const plant = plantMessages(TICKS);
const FIRST = sealedOf(1);
const MINUTE = 60_000;

class Bench {
  readonly fake: FakeClock;
  readonly clock: SteadyClock;
  readonly engine: Engine;
  readonly watch: ClockWatch;
  readonly notes: string[] = [];
  /** Ticks closed at each look. */
  readonly closed: number[] = [];
  /** Size of the plant's own clock's error, ms. */
  plantMs = 0;
  #next = 0;
  #second = 0;

  constructor(disk = new MemoryDisk(), wallMs = FIRST_TICK * MINUTE, bundle: Uint8Array | null = FIRST, at = site) {
    this.fake = new FakeClock(wallMs);
    this.clock = new SteadyClock(this.fake);
    const keeper = new BundleKeeper(disk, 'data', at, trusted);
    const note = (_: string, text: string): void => void this.notes.push(text);
    const options = { site: at, gateway: 'g1', disk, folder: 'data', segmentTicks: 60, spoolBytes: 1e9, note };
    this.engine = new Engine(options, keeper);
    this.watch = new ClockWatch(this.clock, this.engine, MINUTE, (text) => this.notes.push(text));
    const offered = bundle === null ? null : keeper.offer(bundle, this.engine.serving?.checked ?? null);
    if (offered?.outcome !== 'accepted') return;
    this.engine.install(offered.checked);
    keeper.serves(offered.checked);
  }

  /** Lets seconds pass; the plant sends as it always does, by a clock of its own. */
  run(seconds: number): void {
    for (let n = 0; n < seconds; n++) {
      this.fake.pass(1000);
      this.#second++;
      for (; this.#next < plant.length * 3; this.#next++) {
        const message = plant[Math.floor(this.#next / 3)]?.[this.#next % 3];
        if (message === undefined) continue;
        if (message.timeMs > FIRST_TICK * MINUTE + this.#second * 1000) break;
        const wall = this.clock.wall();
        this.engine.message(message.topic, message.payload, wall, wall + site.latenessMs + site.tickMs);
      }
      this.watch.check();
      this.closed.push(this.engine.close(this.clock.wall()));
      this.engine.settle();
    }
  }

  get saved(): string {
    const { model, state, bounds } = this.engine.serving!;
    return Buffer.concat([saveState(model, state), saveBounds(model, bounds)]).toString('hex');
  }
}

describe.each([
  ['a day ahead', 86_400_000],
  ['a day back', -86_400_000],
  ['back to 1970', -FIRST_TICK * MINUTE],
])('a step of %s that is taken back', (_, step) => {
  test('leaves state, bounds and record as without it, to the bit', () => {
    const [plain, stepped] = [new Bench(), new Bench()];
    for (const one of [plain, stepped]) one.run(1200);
    stepped.fake.step(step);
    for (const one of [plain, stepped]) one.run(18);
    stepped.fake.step(-step);
    for (const one of [plain, stepped]) one.run(4800);
    expect(stepped.saved).toBe(plain.saved);
    expect(stepped.engine.counters).toEqual(plain.engine.counters);
    expect(stepped.engine.counters.ticks).toBeGreaterThan(90);
  });
});

test('a step ahead that lasts closes few ticks at once and is no gap in the record', () => {
  const one = new Bench();
  one.run(1200);
  one.fake.step(7 * 86_400_000);
  one.run(120);
  expect(Math.max(...one.closed)).toBeLessThanOrEqual(2);
  expect(one.engine.aligner.nextTick).toBe(Math.floor((one.clock.wall() - site.latenessMs) / MINUTE));
  expect(one.engine.counters.skippedTicks).toBeGreaterThan(10_000);
  expect(one.watch.counts).toMatchObject({ steps_ahead: 1, records_renewed: 0 });
});

describe('a step back that lasts', () => {
  test.each([FIRST, null])('renews record and filter, and ticks close again within a minute', (bundle) => {
    const disk = new MemoryDisk();
    const one = new Bench(disk, FIRST_TICK * MINUTE, bundle);
    one.run(1215);
    const before = one.engine.streamName;
    // The clock was ten minutes ahead of the plant's; from here on it is right.
    one.fake.step(-600_000);
    one.run(25);
    expect(one.watch.counts).toMatchObject({ steps_back: 1, records_renewed: 1 });
    const closedSoFar = one.engine.counters.ticks;
    one.run(60 + site.latenessMs / 1000);
    expect(one.engine.counters.ticks).toBeGreaterThan(closedSoFar);
    expect(one.engine.streamName).not.toBe(before);
    one.run(4000);
    const heads = one.engine.spool.waiting.map((entry) => readSegmentHead(one.engine.spool.read(entry)!));
    expect(heads.map((head) => Buffer.from(head.stream).toString('hex') === before)).toEqual([true, false]);
    expect(heads.every((head) => head.site === SITE_NAME)).toBe(true);
    // A restart goes on with the renewed record.
    one.engine.stop();
    const again = new Bench(disk, one.fake.wall(), null);
    expect(again.engine.streamName).toBe(one.engine.streamName);
    expect(again.engine.aligner.nextTick).toBe(one.engine.aligner.nextTick);
  });

  test('is waited for where that takes no longer than a minute or three ticks', () => {
    const one = new Bench();
    one.run(1200);
    const stream = one.engine.streamName;
    one.fake.step(-120_000);
    one.run(600);
    expect(one.engine.streamName).toBe(stream);
    expect(one.watch.counts).toMatchObject({ steps_back: 1, records_renewed: 0 });
    expect(one.engine.aligner.nextTick).toBe(Math.floor((one.clock.wall() - site.latenessMs) / MINUTE));
  });

  test('with a disk that fails goes on without a record and keeps one again once it recovers', () => {
    const disk = new MemoryDisk();
    const one = new Bench(disk);
    one.run(1200);
    disk.faultAt = disk.operations;
    one.fake.step(-3_600_000);
    one.run(200);
    expect(one.engine.journal.fault).toContain('EIO');
    expect(one.engine.serving!.tick).toBeGreaterThan(0);
    disk.repair();
    one.engine.settle(true);
    expect(one.engine.journal.fault).toBeNull();
  });
});

test('a start with a clock an hour behind the record renews it after the patience of a start', () => {
  const disk = new MemoryDisk();
  const first = new Bench(disk);
  first.run(3600);
  first.engine.stop();
  const again = new Bench(disk, FIRST_TICK * MINUTE, null);
  again.run(15);
  expect(again.watch.counts).toMatchObject({ records_renewed: 0 });
  again.run(10);
  expect(again.watch.counts).toMatchObject({ records_renewed: 1 });
});

test('in doubt the watch says so in words, as news once', () => {
  const one = new Bench();
  one.run(60);
  expect(one.watch.doubt).toBeNull();
  one.fake.step(3_600_000);
  one.fake.pass(1000);
  expect(one.watch.check()).toBe(true);
  expect(one.watch.check()).toBe(false);
  expect(one.watch.doubt).toBe(
    'the clock stepped 3600 s ahead and is not believed yet: time goes on by the monotonic clock',
  );
});

describe('readings without a time of their own under a clock that was never set', () => {
  const timeless = parseSite(SITE_TEXT.replaceAll(', time: /t', ''), 'site.yaml');
  const SILENT = Buffer.from('{"v": 1.25}');

  test('wait, and get the time of their arrival once it is', () => {
    const { engine, fake, clock } = new Bench(new MemoryDisk(), 0, null, timeless);
    for (let n = 0; n < 10; n++) {
      fake.pass(MINUTE);
      engine.held.nowMs = clock.monotonic();
      engine.message('plant/level', SILENT, Number.NaN, null);
    }
    expect(engine.counters.readings).toBe(0);
    expect(engine.close(null)).toBe(0);
    const offset = FIRST_TICK * MINUTE - fake.monotonic();
    engine.clockIsSet((atMs) => atMs + offset);
    expect(engine.counters.readings).toBe(10);
    expect(engine.aligner.newestMs).toBe(FIRST_TICK * MINUTE);
    expect(engine.close(FIRST_TICK * MINUTE + 31_000)).toBe(9);
    expect(engine.aligner.nextTick).toBe(FIRST_TICK);
    expect(engine.counters.refused).toEqual({});
  });

  test('are bounded, the oldest counted', () => {
    const { engine } = new Bench(new MemoryDisk(), 0, null, timeless);
    for (let n = 0; n < 16_384 + 500; n++) {
      engine.held.nowMs = n;
      engine.message('plant/level', SILENT, Number.NaN, null);
    }
    expect(engine.counters.refused).toEqual({ 'clock-unset': 500 });
    engine.clockIsSet((atMs) => FIRST_TICK * MINUTE + 1000 * atMs);
    expect(engine.counters.readings).toBe(16_384);
    expect(engine.aligner.newestMs).toBe(FIRST_TICK * MINUTE + 1000 * 16_883);
  });
});
