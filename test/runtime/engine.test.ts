import { parseHealthMessage, readSegmentHead, SegmentReader, segmentHash } from '@stillwell/protocol';
import { saveBounds, saveState } from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { BundleKeeper } from '../../runtime/bundle/change.ts';
import { Engine } from '../../runtime/engine.ts';
import { healthPayload } from '../../runtime/publish/health.ts';
import { MemoryDisk, PowerCut, type Survival } from '../support/memory-disk.ts';
import { seededNumbers } from '../support/models.ts';
import {
  FIRST_TICK,
  type PlantMessage,
  plantMessage,
  plantMessages,
  sealedOf,
  site,
  trusted,
} from '../support/running-site.ts';

const STREAM = new Uint8Array(8).fill(9);
const TICKS = 200;
const plant = plantMessages(TICKS);
const FIRST = sealedOf(1);
const SECOND = sealedOf(2, { seed: 2 });

interface Run {
  engine: Engine;
  keeper: BundleKeeper;
  disk: MemoryDisk;
}

function start(disk: MemoryDisk, segmentTicks = 60, sealed: Uint8Array | null = FIRST): Run {
  const keeper = new BundleKeeper(disk, 'data', site, trusted);
  const options = {
    site,
    gateway: 'g1',
    disk,
    folder: 'data',
    segmentTicks,
    spoolBytes: 1e9,
    stream: STREAM,
    note: () => {},
  };
  const engine = new Engine(options, keeper);
  if (engine.serving === null && sealed !== null) change({ engine, keeper, disk }, sealed);
  return { engine, keeper, disk };
}

function change({ engine, keeper }: Run, sealed: Uint8Array): void {
  const offered = keeper.offer(sealed, engine.serving?.checked ?? null);
  if (offered.outcome === 'refused' && offered.code === 'disk') throw new PowerCut(offered.reason);
  if (offered.outcome !== 'accepted') throw new Error(JSON.stringify(offered));
  engine.install(offered.checked);
  keeper.serves(offered.checked);
}

/** Feeds the readings of ticks [from, to), closing by event time as it goes. */
function feed({ engine }: Run, from: number, to: number): void {
  for (let n = from; n < to; n++) {
    for (const { topic, payload, timeMs } of plant[n]!) engine.message(topic, payload, timeMs, null);
    engine.close((FIRST_TICK + n + 1) * 60_000 + site.latenessMs);
    engine.settle();
  }
}

/** Everything that must be equal to the bit. */
function picture({ engine, disk }: Run): unknown {
  const { model, state, bounds, checked } = engine.serving!;
  const hex = (bytes: Uint8Array): string => Buffer.from(bytes).toString('hex');
  return {
    tick: state.tick,
    bundle: hex(checked.digest),
    state: hex(saveState(model, state)),
    bounds: hex(saveBounds(model, bounds)),
    segments: disk.list('data/spool').map((name) => [name, hex(segmentHash(disk.read(`data/spool/${name}`)!))]),
  };
}

const whole = start(new MemoryDisk());
feed(whole, 0, TICKS);
const expected = picture(whole);

describe('a restart', () => {
  test.each([1, 60, 61, 119])('after tick %i, cleanly, changes nothing', (stop) => {
    const first = start(new MemoryDisk());
    feed(first, 0, stop);
    first.engine.stop();
    const second = start(first.disk);
    expect(second.engine.serving!.tick).toBe(FIRST_TICK + stop - 1);
    feed(second, stop, TICKS);
    expect(picture(second)).toEqual(expected);
  });

  test('readings of an open tick survive a clean stop', () => {
    const first = start(new MemoryDisk());
    feed(first, 0, 50);
    for (const { topic, payload, timeMs } of plant[50]!) first.engine.message(topic, payload, timeMs, null);
    first.engine.stop();
    const second = start(first.disk);
    second.engine.close((FIRST_TICK + 51) * 60_000 + site.latenessMs);
    feed(second, 51, TICKS);
    expect(picture(second)).toEqual(expected);
  });

  test('with another segment length goes on and loses nothing', () => {
    const first = start(new MemoryDisk(), 1000);
    feed(first, 0, 90);
    first.engine.stop();
    const second = start(first.disk, 40);
    feed(second, 90, 130);
    const third = start(second.disk.afterPowerCut('everything'), 40);
    feed(third, 130, TICKS);
    const { state } = expected as { state: string };
    expect((picture(third) as { state: string }).state).toBe(state);
  });
});

describe('a power cut', () => {
  // Short segments, so that few ticks hold several boundaries.
  const SEGMENT = 10;
  const CUT_WITHIN = 24;
  const END = 35;
  const through = start(new MemoryDisk(), SEGMENT);
  feed(through, 0, CUT_WITHIN);
  const { operations } = through.disk;
  feed(through, CUT_WITHIN, END);
  const uninterrupted = picture(through);

  function cutAndGoOn(cutAt: number, survival: Survival): void {
    const disk = new MemoryDisk();
    disk.cutAt = cutAt;
    try {
      feed(start(disk, SEGMENT), 0, CUT_WITHIN);
    } catch (error) {
      if (!(error instanceof PowerCut)) throw error;
    }
    const after = start(disk.afterPowerCut(survival), SEGMENT);
    const next = after.engine.aligner.nextTick ?? FIRST_TICK;
    feed(after, next - FIRST_TICK, END);
    expect(picture(after)).toEqual(uninterrupted);
  }

  test('at any operation, whatever was not synced lost, ends in the same state and the same segments', () => {
    for (let cutAt = 0; cutAt < operations; cutAt++) cutAndGoOn(cutAt, 'nothing');
  });

  /** A broker that sends again whatever was not acknowledged, in order; the engine acknowledges after a sync. */
  async function deliver(run: Run, waiting: PlantMessage[], group: number): Promise<void> {
    while (waiting.length > 0) {
      const together = waiting.slice(0, group);
      for (const { topic, payload, timeMs } of together) {
        run.engine.message(topic, payload, timeMs, null);
        run.engine.close(null);
      }
      run.engine.settle();
      await run.engine.journal!.syncSoon();
      if (!run.engine.journal!.isDurable || run.engine.journal!.fault !== null) throw new PowerCut('not on disk');
      waiting.splice(0, together.length);
    }
  }

  test.each([
    ['nothing', 1],
    ['nothing', 4],
    ['any part', 4],
  ] as const)(
    'at any operation, %s of the unsynced kept, loses no acknowledged reading (%i at a time)',
    async (kept, group) => {
      const said = plant.slice(0, CUT_WITHIN).flat();
      const ending = start(new MemoryDisk(), SEGMENT);
      await deliver(ending, [...said], group);
      const last = ending.disk.operations;
      const endless = picture(ending);
      const random = seededNumbers(78);
      for (let cutAt = 0; cutAt < last; cutAt++) {
        const disk = new MemoryDisk();
        disk.cutAt = cutAt;
        const waiting = [...said];
        try {
          await deliver(start(disk, SEGMENT), waiting, group);
        } catch (error) {
          if (!(error instanceof PowerCut)) throw error;
        }
        const after = start(disk.afterPowerCut(kept === 'nothing' ? 'nothing' : random), SEGMENT);
        await deliver(after, waiting, group);
        expect(picture(after)).toEqual(endless);
        expect(after.engine.counters.corrections).toBe(0);
      }
    },
  );

  test('at any operation, any part of what was not synced kept', () => {
    const random = seededNumbers(77);
    for (let cutAt = 0; cutAt < operations; cutAt++) cutAndGoOn(cutAt, random);
  });
});

test('a checkpoint that is gone starts a new stream, since its numbers were given away', () => {
  const first = start(new MemoryDisk());
  feed(first, 0, 130);
  first.engine.stop();
  const waiting = first.engine.spool.waiting.length;
  expect(waiting).toBe(2);
  first.disk.remove('data/checkpoint');
  const second = start(first.disk);
  expect(second.engine.identity.stream).not.toEqual(STREAM);
  feed(second, 130, TICKS);
  expect(second.engine.spool.waiting.filter(({ stream }) => stream === '09'.repeat(8))).toHaveLength(waiting);
  expect(start(second.disk).engine.identity.stream).toEqual(second.engine.identity.stream);
});

describe('a failing disk', () => {
  test('does not stop the filter, and the record is whole once the disk works again', () => {
    const disk = new MemoryDisk();
    const run = start(disk);
    feed(run, 0, 70);
    disk.fault = 'ENOSPC';
    disk.faultAt = disk.operations;
    feed(run, 70, 150);
    expect(run.engine.journal!.fault).toContain('ENOSPC');
    expect(run.engine.serving!.tick).toBe(FIRST_TICK + 149);
    disk.repair();
    run.engine.settle(true);
    expect(run.engine.journal!.fault).toBeNull();
    feed(run, 150, TICKS);
    const heads = disk.list('data/spool').map((name) => readSegmentHead(disk.read(`data/spool/${name}`)!));
    let next = FIRST_TICK;
    for (const head of heads) {
      expect(head.firstTick).toBe(next);
      next += head.ticks;
    }
    expect(next).toBeGreaterThanOrEqual(FIRST_TICK + 150);
    const after = start(disk.afterPowerCut('nothing'));
    expect(after.engine.serving!.tick).toBeGreaterThanOrEqual(next - 1);
  });
});

describe('a first reading from long ago', () => {
  test.each([
    ['before the first bundle', null],
    ['with a bundle', FIRST],
  ])('is passed over at once, %s', (_, sealed) => {
    const { engine } = start(new MemoryDisk(), 60, sealed);
    const { topic } = plantMessage(0, 0, 2);
    // A sensor whose clock was never set, retained at the broker.
    engine.message(topic, Buffer.from('{"v": 2, "t": "1970-01-01T00:00:00Z"}'), 0, null);
    const before = plant[0]!.find((message) => message.topic !== topic)!;
    engine.message(before.topic, before.payload, before.timeMs, null);
    engine.message(before.topic, before.payload, before.timeMs, null);
    expect(engine.close((FIRST_TICK + 1) * 60_000 + site.latenessMs)).toBe(1);
    expect(engine.aligner.nextTick).toBe(FIRST_TICK + 1);
    expect(engine.counters.skippedTicks).toBe(0);
    expect(engine.serving?.tick ?? FIRST_TICK).toBe(FIRST_TICK);
  });
});

test('health says when the clock was set back behind the ticks closed by it', () => {
  const run = start(new MemoryDisk());
  feed(run, 0, TICKS);
  const closedMs = (FIRST_TICK + TICKS) * 60_000;
  const reasonAt = (nowMs: number, wallTickMs: number | null): string | undefined => {
    const ship = { sent: 0, resent: 0, confirmed: 0, conflicts: 0, parked: 0 };
    const status = 'running' as const;
    const about = { site: site.site, gateway: 'g1', holdsMs: 1000, lastChange: null, reconnects: 0 };
    const bytes = healthPayload({ ...about, status, engine: run.engine, ship, nowMs, wallTickMs });
    return parseHealthMessage(bytes).quality_reason;
  };
  const usual = reasonAt(closedMs, 60_000);
  expect(usual ?? '').not.toContain('clock');
  expect(reasonAt(closedMs - 60_000, 60_000)).toBe(usual);
  expect(reasonAt(closedMs - 180_000, 60_000)).toContain(
    `clock was set back: nothing is forecast before ${new Date(closedMs).toISOString()}`,
  );
  expect(reasonAt(closedMs - 180_000, null)).toBe(usual);
});

describe('a change of bundle', () => {
  test('warms on the recent ticks, keys the next segment and survives a cut at any operation', () => {
    const quiet = start(new MemoryDisk());
    feed(quiet, 0, 90);
    const before = quiet.disk.operations;
    change(quiet, SECOND);
    const after = quiet.disk.operations;
    expect(quiet.engine.serving!.isWarming).toBe(false);
    feed(quiet, 90, TICKS);
    const changed = picture(quiet) as { segments: [string, string][] };
    const third = readSegmentHead(quiet.disk.read(`data/spool/${changed.segments[2]![0]}`)!);
    expect(third).toMatchObject({ number: 2, start: 'keyed', firstTick: FIRST_TICK + 90 });
    for (let cutAt = before; cutAt < after; cutAt++) {
      const disk = new MemoryDisk();
      const run = start(disk);
      feed(run, 0, 90);
      run.engine.stop();
      disk.cutAt = disk.operations + (cutAt - before);
      try {
        change(start(disk), SECOND);
      } catch (error) {
        if (!(error instanceof PowerCut)) throw error;
      }
      const next = start(disk.afterPowerCut('nothing'));
      expect(next.engine.serving).not.toBeNull();
      const offered = next.keeper.offer(SECOND, next.engine.serving!.checked);
      if (offered.outcome === 'accepted') {
        next.engine.install(offered.checked);
        next.keeper.serves(offered.checked);
      } else expect(offered.outcome).toBe('known');
      feed(next, 90, TICKS);
      expect(picture(next)).toEqual(changed);
    }
  });

  test('a first bundle starts on the readings heard before it', () => {
    const run = start(new MemoryDisk(), 60, null);
    feed(run, 0, 50);
    change(run, FIRST);
    expect(run.engine.serving!.tick).toBe(FIRST_TICK + 49);
    feed(run, 50, TICKS);
    expect((picture(run) as { state: string }).state).toBe((expected as { state: string }).state);
  });
});

test('late readings travel as corrections in the open segment, also over a restart', () => {
  const run = start(new MemoryDisk());
  feed(run, 0, 20);
  const late = plantMessage(0, (FIRST_TICK + 10) * 60_000 + 59_000, 12.34);
  run.engine.message(late.topic, late.payload, late.timeMs, null);
  expect(run.engine.counters).toMatchObject({ late: 1, corrections: 1 });
  run.engine.settle();
  const again = start(run.disk.afterPowerCut('everything'));
  // Redelivered, it changes nothing; another one still does, though its tick closed before the restart.
  again.engine.message(late.topic, late.payload, late.timeMs, null);
  expect(again.engine.counters).toMatchObject({ duplicates: 1, corrections: 0 });
  const another = plantMessage(1, (FIRST_TICK + 11) * 60_000 + 59_000, 5.67);
  again.engine.message(another.topic, another.payload, another.timeMs, null);
  feed(again, 20, 61);
  const bytes = again.disk.read(`data/spool/${again.disk.list('data/spool')[0]}`)!;
  const reader = new SegmentReader(bytes, again.engine.serving!.residualScaleSteps());
  expect(reader.corrections).toEqual([
    { tick: FIRST_TICK + 10, channel: 0, index: 1234 },
    { tick: FIRST_TICK + 11, channel: 1, index: 567 },
  ]);
});

test('an outage too long to bridge starts the filter afresh, keyed', () => {
  const run = start(new MemoryDisk());
  feed(run, 0, 20);
  const later = FIRST_TICK + 100_000;
  run.engine.close((later + 1) * 60_000 + site.latenessMs);
  expect(run.engine.serving!.tick).toBe(later);
  expect(run.engine.counters.skippedTicks).toBeGreaterThan(99_000);
  expect(run.engine.serving!.isWarming).toBe(true);
});

test('hostile payloads are counted by cause and change nothing', () => {
  const run = start(new MemoryDisk());
  const payloads = ['', '{', '{"v":"x","t":0}', '{"v":1}', '{"v":1e999,"t":0}', '{"v":500,"t":0}', '\u0000', '[]'];
  for (const text of payloads) run.engine.message('plant/level', Buffer.from(text), 0, null);
  const { refused, readings } = run.engine.counters;
  expect(readings).toBe(0);
  expect(Object.values(refused).reduce((sum, n) => sum + n, 0)).toBe(payloads.length);
  expect(refused['above-range']).toBe(1);
});
