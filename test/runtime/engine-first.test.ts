/** A gateway without a bundle: what it records from its first reading, over restarts, power cuts and site files. */
import { latticeIndex, latticeValue, parseSite, readSegmentHead, type Site, segmentHash } from '@stillwell/protocol';
import { describe, expect, test } from 'vitest';
import { BundleKeeper } from '../../runtime/bundle/change.ts';
import { Engine } from '../../runtime/engine.ts';
import type { CheckedBundle } from '../../runtime/serving.ts';
import { replaySegment } from '../../trainer/desk/replay.ts';
import { type PlainReplay, replayPlain } from '../../trainer/desk/replay-plain.ts';
import { MemoryDisk, PowerCut, type Survival } from '../support/memory-disk.ts';
import { seededNumbers } from '../support/models.ts';
import { FIRST_TICK, plantMessage, plantMessages, SITE_TEXT, sealedOf, trusted } from '../support/running-site.ts';

const OPEN_TEXT = SITE_TEXT.replaceAll('    resolution: 0.01\n', '');
const OPEN = parseSite(OPEN_TEXT);
const DECLARED = parseSite(SITE_TEXT);
const MINUTE = 60_000;

interface Run {
  readonly engine: Engine;
  readonly keeper: BundleKeeper;
  readonly disk: MemoryDisk;
  readonly said: string[];
}

function start(disk: MemoryDisk, site: Site = OPEN, segmentTicks = 60): Run {
  const keeper = new BundleKeeper(disk, 'data', site, trusted);
  const said: string[] = [];
  const engine = new Engine(
    {
      site,
      gateway: 'g1',
      disk,
      folder: 'data',
      segmentTicks,
      spoolBytes: 1e9,
      stream: new Uint8Array(8).fill(9),
      note: (_, text) => said.push(text),
    },
    keeper,
  );
  return { engine, keeper, disk, said };
}

/** One reading of a channel at a second of a tick after the first. */
function read({ engine }: Run, tick: number, channel: number, value: number, second = 5): void {
  const { topic, payload, timeMs } = plantMessage(channel, (FIRST_TICK + tick) * MINUTE + 1000 * second, value);
  engine.message(topic, payload, timeMs, null);
}

/** Closes the tick, and what is due with it. */
function close({ engine }: Run, tick: number): void {
  engine.close((FIRST_TICK + tick + 1) * MINUTE + OPEN.latenessMs);
  engine.settle();
}

interface Recovered {
  /** Reading by `tick channel`, ticks after the first. */
  readonly values: Map<string, number>;
  readonly replays: PlainReplay[];
  readonly keyed: number;
}

/** What a desk makes of the spool's segments of one stream. */
function recovered(disk: MemoryDisk, stream = '09'.repeat(8)): Recovered {
  const values = new Map<string, number>();
  const replays: PlainReplay[] = [];
  let state: Uint8Array | null = null;
  let keyed = 0;
  for (const name of disk.list('data/spool').filter((one) => one.startsWith(stream))) {
    const bytes = disk.read(`data/spool/${name}`)!;
    if (readSegmentHead(bytes).start === 'keyed') keyed++;
    const replay = replayPlain(bytes, state);
    state = replay.endState;
    replays.push(replay);
    const { channels } = replay.layout;
    const key = (place: number): string =>
      `${replay.firstTick - FIRST_TICK + Math.floor(place / channels.length)} ${place % channels.length}`;
    replay.lattice.forEach((index, place) => {
      const { step, offset } = channels[place % channels.length]!.lattice;
      if (!Number.isNaN(index)) values.set(key(place), latticeValue(index, step, offset));
    });
    for (let i = 0; i < replay.off.length; i += 2) values.set(key(replay.off[i]!), replay.off[i + 1]!);
  }
  return { values, replays, keyed };
}

/** Feeds the readings of ticks [from, to). */
function feed(run: Run, plant: ReturnType<typeof plantMessages>, from: number, to: number): void {
  for (let n = from; n < to; n++) {
    for (const { topic, payload, timeMs } of plant[n]!) run.engine.message(topic, payload, timeMs, null);
    close(run, n);
  }
}

const TICKS = 90;
const plant = plantMessages(TICKS);

function expected(from: number, to: number): Map<string, number> {
  const values = new Map<string, number>();
  for (let n = from; n < to; n++)
    for (const { topic, payload } of plant[n]!) {
      const channel = ['plant/level', 'plant/flow', 'plant/pump'].indexOf(topic);
      values.set(`${n} ${channel}`, (JSON.parse(Buffer.from(payload).toString()) as { v: number }).v);
    }
  return values;
}

describe('the record before the first bundle', () => {
  test.each([
    ['steps found in the readings', OPEN],
    ['steps of the site file', DECLARED],
  ])('gives back every reading exactly (%s)', (_, site) => {
    const run = start(new MemoryDisk(), site, 20);
    feed(run, plant, 0, TICKS);
    const { values, replays, keyed } = recovered(run.disk);
    expect(values).toEqual(expected(0, 80));
    expect(replays.every(({ layout }) => layout.channels.every(({ lattice }) => lattice.step === 0.01))).toBe(true);
    expect(keyed).toBe(1);
    expect(run.engine.counters.ticks).toBe(TICKS);
    expect(run.engine.serving).toBeNull();
  });

  const REAL = 20.123456789012344;
  const GLITCH = 4_294_967_295.5;
  test('keeps finer readings, wild ones and computed ones as they came, and takes the finer step once it pays', () => {
    const run = start(new MemoryDisk(), OPEN, 1000);
    const random = seededNumbers(4);
    const given: number[] = [];
    for (let n = 0; n < 40; n++) {
      const decimals = n < 10 ? 1 : 3;
      let value = Math.round(20 * 10 ** decimals + 99 * random()) / 10 ** decimals;
      if (n === 0) value = 20.3;
      if (n === 5) value = REAL;
      if (n === 7) value = GLITCH;
      if (n === 8) value = 1e-9;
      given.push(value);
      read(run, n, 1, value);
      close(run, n);
    }
    run.engine.install(acceptedOf(run));
    const { values, replays } = recovered(run.disk);
    expect(given.map((_, n) => values.get(`${n} 1`))).toEqual(given);
    expect(replays.map(({ layout }) => layout.channels[1]!.lattice.step)).toEqual([0.1, 0.001]);
    // Two strays (the wild one lies on the lattice) and what came before the step was known to be finer.
    expect(replays.map(({ off }) => off.length / 2)).toEqual([2 + 7, 0]);
  });

  test('a sensor that sends 32-bit floats is taken at the decimals they stand for, as the trainer takes it', () => {
    const run = start(new MemoryDisk());
    for (let n = 0; n < 30; n++) {
      read(run, n, 0, Math.fround((5037 + n * 37) / 1000));
      close(run, n);
    }
    run.engine.install(acceptedOf(run));
    const { values } = recovered(run.disk);
    for (let n = 0; n < 30; n++) expect(values.get(`${n} 0`)).toBe((5037 + n * 37) / 1000);
  });

  test('means and sums of several readings are rounded to the readings’ own step', () => {
    const site = parseSite(
      OPEN_TEXT.replace('aggregate: last', 'aggregate: mean').replace('aggregate: last', 'aggregate: sum'),
    );
    const run = start(new MemoryDisk(), site);
    for (let n = 0; n < 20; n++) {
      for (let i = 0; i < 3; i++) for (const channel of [0, 1]) read(run, n, channel, (10 * n + i * i) / 10, 10 + i);
      close(run, n);
    }
    run.engine.install(acceptedOf(run, site));
    const { values } = recovered(run.disk);
    for (let n = 0; n < 20; n++) {
      expect(values.get(`${n} 0`)).toBe(latticeValue(latticeIndex((30 * n + 5) / 30, 0.1, 0), 0.1, 0));
      expect(values.get(`${n} 1`)).toBe((30 * n + 5) / 10);
    }
  });

  test('late readings travel as corrections, on a finer step where they need one', () => {
    const run = start(new MemoryDisk());
    feed(run, plant, 0, 20);
    read(run, 10, 0, 12.34, 59);
    read(run, 11, 1, 5.6789, 59);
    expect(run.engine.counters).toMatchObject({ late: 2, corrections: 2 });
    run.engine.settle();
    const again = start(run.disk.afterPowerCut('everything'));
    again.engine.install(acceptedOf(again));
    const { replays } = recovered(again.disk);
    const late = replays.flatMap(({ corrections, layout }) =>
      corrections.map(({ tick, channel, index }) => [
        tick - FIRST_TICK,
        channel,
        index,
        layout.channels[channel]!.lattice.step,
      ]),
    );
    expect(late).toEqual([
      [10, 0, 1234, 0.01],
      [11, 1, 56_789, 0.0001],
    ]);
  });
});

/** A bundle to close the open segment with; a site of other aggregates gets that of OPEN, unchecked. */
function acceptedOf({ keeper }: Run, site: Site = OPEN): CheckedBundle {
  const offered = (site === OPEN ? keeper : new BundleKeeper(new MemoryDisk(), 'data', OPEN, trusted)).offer(
    sealedOf(1),
    null,
  );
  if (offered.outcome !== 'accepted') throw new Error(JSON.stringify(offered));
  return offered.checked;
}

function picture({ engine, disk }: Run): unknown {
  return {
    next: engine.aligner.nextTick,
    segments: disk
      .list('data/spool')
      .map((name) => [name, Buffer.from(segmentHash(disk.read(`data/spool/${name}`)!)).toString('hex')]),
  };
}

describe('a restart without a bundle', () => {
  const through = start(new MemoryDisk(), OPEN, 20);
  feed(through, plant, 0, TICKS);

  test.each([1, 20, 21, 47])('after tick %i, cleanly, changes nothing', (stop) => {
    const first = start(new MemoryDisk(), OPEN, 20);
    feed(first, plant, 0, stop);
    first.engine.stop();
    const second = start(first.disk, OPEN, 20);
    feed(second, plant, stop, TICKS);
    expect(picture(second)).toEqual(picture(through));
  });
});

describe('a power cut without a bundle', () => {
  const SEGMENT = 10;
  const END = 26;
  /** From the thirteenth tick on one sensor says a decimal more: a boundary of its own. */
  const finer = plant
    .slice(0, END)
    .map((messages, n) => [
      ...messages,
      ...(n < 12 ? [] : [plantMessage(1, (FIRST_TICK + n) * MINUTE + 40_000, Number((n + 0.125).toFixed(3)))]),
    ]);
  const through = start(new MemoryDisk(), OPEN, SEGMENT);
  feed(through, finer, 0, END - 2);
  const { operations } = through.disk;
  feed(through, finer, END - 2, END);

  function cutAndGoOn(cutAt: number, survival: Survival): void {
    const disk = new MemoryDisk();
    disk.cutAt = cutAt;
    try {
      feed(start(disk, OPEN, SEGMENT), finer, 0, END - 2);
    } catch (error) {
      if (!(error instanceof PowerCut)) throw error;
    }
    const after = start(disk.afterPowerCut(survival), OPEN, SEGMENT);
    feed(after, finer, (after.engine.aligner.nextTick ?? FIRST_TICK) - FIRST_TICK, END);
    expect(picture(after)).toEqual(picture(through));
  }

  test('at any operation ends in the same segments', () => {
    const random = seededNumbers(77);
    for (let cutAt = 0; cutAt < operations; cutAt++) cutAndGoOn(cutAt, cutAt % 2 === 0 ? 'nothing' : random);
  });

  test('at any operation loses no reading that was acknowledged', async () => {
    const said = finer.flat();
    const deliver = async (run: Run, waiting: typeof said): Promise<void> => {
      while (waiting.length > 0) {
        const together = waiting.slice(0, 3);
        for (const { topic, payload, timeMs } of together) {
          run.engine.message(topic, payload, timeMs, null);
          run.engine.close(null);
        }
        run.engine.settle();
        await run.engine.journal.syncSoon();
        if (!run.engine.journal.isDurable || run.engine.journal.fault !== null) throw new PowerCut('not on disk');
        waiting.splice(0, together.length);
      }
    };
    const whole = start(new MemoryDisk(), OPEN, SEGMENT);
    await deliver(whole, [...said]);
    const last = whole.disk.operations;
    for (let cutAt = 0; cutAt < last; cutAt++) {
      const disk = new MemoryDisk();
      disk.cutAt = cutAt;
      const waiting = [...said];
      try {
        await deliver(start(disk, OPEN, SEGMENT), waiting);
      } catch (error) {
        if (!(error instanceof PowerCut)) throw error;
      }
      const after = start(disk.afterPowerCut('nothing'), OPEN, SEGMENT);
      await deliver(after, waiting);
      expect(picture(after)).toEqual(picture(whole));
    }
  });
});

describe('the first bundle', () => {
  test('takes over at a tick boundary, warmed on what was recorded, also over a cut at any operation', () => {
    const quiet = start(new MemoryDisk(), OPEN, 20);
    feed(quiet, plant, 0, 50);
    const before = quiet.disk.operations;
    quiet.engine.install(acceptedOf(quiet));
    const boundary = quiet.disk.operations - before;
    expect(quiet.engine.serving!.isWarming).toBe(false);
    expect(quiet.engine.serving!.tick).toBe(FIRST_TICK + 49);
    feed(quiet, plant, 50, TICKS);
    const names = quiet.disk.list('data/spool');
    const heads = names.map((name) => readSegmentHead(quiet.disk.read(`data/spool/${name}`)!));
    expect(heads.map(({ firstTick, ticks }) => [firstTick - FIRST_TICK, ticks])).toEqual([
      [0, 20],
      [20, 20],
      [40, 10],
      [50, 20],
      [70, 20],
    ]);
    expect(heads.map(({ format, start: how }) => `${format} ${how}`)).toEqual([
      '2 keyed',
      '2 chained',
      '2 chained',
      '1 keyed',
      '1 chained',
    ]);
    const { model } = quiet.engine.serving!;
    const replay = replaySegment(quiet.disk.read(`data/spool/${names[3]}`)!, model, null);
    expect(replay.head.ticks).toBe(20);
    for (let cutAt = 0; cutAt < boundary; cutAt++) {
      const disk = new MemoryDisk();
      const first = start(disk, OPEN, 20);
      feed(first, plant, 0, 50);
      first.engine.stop();
      const run = start(disk, OPEN, 20);
      disk.cutAt = disk.operations + cutAt;
      const offered = run.keeper.offer(sealedOf(1), null);
      try {
        if (offered.outcome === 'accepted') run.engine.install(offered.checked);
        else expect(offered.outcome === 'refused' && offered.code).toBe('disk');
      } catch (error) {
        if (!(error instanceof PowerCut)) throw error;
      }
      const next = start(disk.afterPowerCut('nothing'), OPEN, 20);
      expect(next.engine.aligner.nextTick).toBe(FIRST_TICK + 50);
      if (next.engine.serving === null) next.engine.install(acceptedOf(next));
      feed(next, plant, 50, TICKS);
      expect(picture(next)).toEqual(picture(quiet));
    }
  });
});

describe('another site file', () => {
  test('with one signal more closes what was recorded under the old one, and loses no reading', () => {
    const run = start(new MemoryDisk(), OPEN, 20);
    feed(run, plant, 0, 30);
    read(run, 30, 0, 7.25);
    run.engine.stop();
    const more = parseSite(
      OPEN_TEXT.replace(
        'signals:\n',
        'signals:\n  - name: new\n    topic: plant/new\n    payload: { json: /v, time: /t }\n    unit: m\n',
      ),
    );
    const after = start(run.disk, more, 20);
    expect(after.said.join()).toContain('the site file has other signals than before');
    expect(recovered(after.disk).values).toEqual(expected(0, 30));
    for (let n = 30; n < 60; n++) {
      read(after, n, 2, n);
      close(after, n);
    }
    const stream = Buffer.from(after.engine.identity.stream).toString('hex');
    const { values, replays } = recovered(after.disk, stream);
    expect(replays[0]!.layout.channels.map(({ name }) => name)).toEqual(['new', 'level', 'flow', 'pump']);
    expect(values.get('30 1')).toBe(7.25);
    expect(start(after.disk, more, 20).engine.identity.stream).toEqual(after.engine.identity.stream);
  });

  test('with another resolution goes on in the same stream', () => {
    const run = start(new MemoryDisk(), DECLARED, 60);
    feed(run, plant, 0, 30);
    run.engine.stop();
    const coarse = parseSite(SITE_TEXT.replace('resolution: 0.01', 'resolution: 0.5'));
    const after = start(run.disk, coarse, 60);
    feed(after, plant, 30, TICKS);
    after.engine.install(acceptedOf(after));
    const { values, replays } = recovered(after.disk);
    expect(replays.map(({ layout }) => layout.channels[0]!.lattice.step)).toEqual([0.01, 0.5]);
    const all = expected(0, TICKS);
    for (const [key, value] of all) {
      const [tick, channel] = key.split(' ').map(Number) as [number, number];
      expect(values.get(key)).toBe(tick >= 30 && channel === 0 ? Math.round(value / 0.5) * 0.5 + 0 : value);
    }
  });
});

test('an outage too long to bridge leaves the steps and starts a keyed segment', () => {
  const run = start(new MemoryDisk());
  feed(run, plant, 0, 20);
  const later = 100_000;
  close(run, later);
  // So far ahead of all before, the first is not believed without a second.
  read(run, later + 1, 0, 9);
  read(run, later + 1, 0, 3.25, 6);
  close(run, later + 1);
  run.engine.install(acceptedOf(run));
  const { replays, keyed, values } = recovered(run.disk);
  expect(keyed).toBe(2);
  expect(replays[1]!.firstTick).toBe(FIRST_TICK + later);
  expect(values.get(`${later + 1} 0`)).toBe(3.25);
});
