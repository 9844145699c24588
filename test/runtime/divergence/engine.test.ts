/** Filters that fail on a gateway's own readings: what takes over, what is published, and that the record can be read back. */
import { readSegmentHead, SegmentReader } from '@stillwell/protocol';
import type { Model } from '@stillwell/runtime/filter';
import { expect, test } from 'vitest';
import { BundleKeeper } from '../../../runtime/bundle/change.ts';
import { Engine } from '../../../runtime/engine.ts';
import { judge } from '../../../runtime/publish/quality.ts';
import { replaySegment } from '../../../trainer/desk/replay.ts';
import { MemoryDisk } from '../../support/memory-disk.ts';
import { FIRST_TICK, plantMessages, sealedOf, site, trusted } from '../../support/running-site.ts';

const STREAM = new Uint8Array(8).fill(9);
const TICKS = 200;
const FAILS_AT = 100;
const plant = plantMessages(TICKS);

interface Run {
  readonly engine: Engine;
  readonly keeper: BundleKeeper;
  readonly disk: MemoryDisk;
  readonly notes: string[];
}

function start(disk: MemoryDisk): Run {
  const keeper = new BundleKeeper(disk, 'data', site, trusted);
  const notes: string[] = [];
  const note = (_: string, text: string): void => void notes.push(text);
  const options = {
    site,
    gateway: 'g1',
    disk,
    folder: 'data',
    segmentTicks: 60,
    spoolBytes: 1e9,
    stream: STREAM,
    note,
  };
  return { engine: new Engine(options, keeper), keeper, disk, notes };
}

function offer({ engine, keeper }: Run, sealed: Uint8Array): boolean {
  const offered = keeper.offer(sealed, engine.serving?.checked ?? null);
  if (offered.outcome !== 'accepted') throw new Error(JSON.stringify(offered));
  const isInstalled = engine.install(offered.checked);
  if (isInstalled) keeper.serves(offered.checked);
  return isInstalled;
}

/** Makes steps of the filter throw: plans are asked for with each forecast, and never while a state is rebuilt or replayed. */
function plantFailure({ engine }: Run, fails: (model: Model, tick: number) => boolean): void {
  engine.plans.fill = (model, tick) => {
    if (fails(model, tick)) throw new Error('planted failure');
    return false;
  };
}

function feed({ engine }: Run, from: number, to: number): void {
  for (let n = from; n < to; n++) {
    for (const { topic, payload, timeMs } of plant[n]!) engine.message(topic, payload, timeMs, null);
    engine.close((FIRST_TICK + n + 1) * 60_000 + site.latenessMs);
    engine.settle();
    const { serving } = engine;
    serving?.computeBounds();
    for (const path of [serving?.median, serving?.lower, serving?.upper]) {
      expect(path?.every(Number.isFinite) ?? true).toBe(true);
    }
  }
}

/** Ticks of all closed segments in order, each decoded as the desk does; those without a bundle by what they say themselves. */
function decodedTicks({ disk, keeper }: Run): number[] {
  const ends = new Map<number, Uint8Array>();
  const ticks: number[] = [];
  for (const name of disk.list('data/spool')) {
    const bytes = disk.read(`data/spool/${name}`)!;
    const head = readSegmentHead(bytes);
    const known = keeper.byDigest(head.bundle);
    if (known === null) {
      const reader = new SegmentReader(bytes, new Float64Array(head.channelCount).fill(Number.NaN));
      expect(reader.head.ticks).toBeGreaterThan(0);
    } else ends.set(head.number, replaySegment(bytes, known.model, ends.get(head.number - 1) ?? null).endState);
    for (let k = 0; k < head.ticks; k++) ticks.push(head.firstTick + k - FIRST_TICK);
  }
  return ticks;
}

function upTo(count: number): number[] {
  return Array.from({ length: count }, (_, n) => n);
}

test('one failure starts the filter afresh at that tick, and every segment decodes', () => {
  const run = start(new MemoryDisk());
  offer(run, sealedOf(1));
  let isPlanted = true;
  plantFailure(run, (_, tick) => {
    const fails = isPlanted && tick === FIRST_TICK + FAILS_AT;
    if (fails) isPlanted = false;
    return fails;
  });
  feed(run, 0, TICKS);
  expect(run.engine.takeover.ladder.counts).toEqual({ reset: 1, 'previous-bundle': 0, holding: 0 });
  expect(run.engine.takeover.ladder.present).toMatchObject({ step: 'reset', sinceTick: FIRST_TICK + FAILS_AT });
  expect(run.notes.join('\n')).toContain('planted failure');
  expect(run.engine.serving!.isHolding).toBe(false);
  const ticks = decodedTicks(run);
  expect(ticks).toEqual(upTo(ticks.length));
  expect(ticks.length).toBeGreaterThan(FAILS_AT + 50);
});

test('a bundle that fails again gives way to the one before it, also after a restart', () => {
  const run = start(new MemoryDisk());
  offer(run, sealedOf(1));
  feed(run, 0, 30);
  offer(run, sealedOf(2, { seed: 2 }));
  const second = run.engine.serving!.checked;
  plantFailure(run, (model, tick) => model === second.model && tick >= FIRST_TICK + FAILS_AT);
  feed(run, 30, 150);
  expect(run.engine.serving!.checked.sequence).toBe(1);
  expect(run.engine.takeover.ladder.counts['previous-bundle']).toBe(1);
  run.engine.stop();
  const again = start(run.disk);
  expect(again.engine.serving!.checked.sequence).toBe(1);
  feed(again, 150, TICKS);
  const ticks = decodedTicks(again);
  expect(ticks).toEqual(upTo(ticks.length));
  // Sent anew by a person, it is given another trial.
  expect(offer(again, sealedOf(3, { seed: 2 }))).toBe(true);
  expect(again.engine.serving!.checked.sequence).toBe(3);
});

test('where no bundle is fit, last readings are held, the record goes on, and no start fails', () => {
  const run = start(new MemoryDisk());
  offer(run, sealedOf(1));
  plantFailure(run, (_, tick) => tick >= FIRST_TICK + FAILS_AT);
  feed(run, 0, 170);
  const { serving } = run.engine;
  expect(serving!.isHolding).toBe(true);
  expect(judge(serving!, false, 0, null).quality).toBe('F');
  expect(run.engine.takeover.ladder.present).toMatchObject({ step: 'holding', sinceTick: FIRST_TICK + FAILS_AT });
  const { model, state, median, lower, upper } = serving!;
  for (let i = 0; i < model.signalCount; i++) {
    const held = model.mean[i]! + model.scale[i]! * state.value[i]!;
    for (let at = i * model.horizon; at < (i + 1) * model.horizon; at++) {
      expect(median[at]).toBe(held);
      expect(lower[at]! < held && upper[at]! > held).toBe(true);
    }
  }
  run.engine.stop();
  const again = start(run.disk);
  expect(again.engine.serving!.isHolding).toBe(true);
  feed(again, 170, TICKS);
  expect(again.engine.serving!.isHolding).toBe(true);
  const ticks = decodedTicks(again);
  expect(ticks).toEqual(upTo(ticks.length));
  expect(ticks.length).toBeGreaterThan(FAILS_AT + 50);
  expect(offer(again, sealedOf(2, { seed: 2 }))).toBe(true);
  expect(again.engine.serving!.isHolding).toBe(false);
  expect(again.engine.takeover.ladder.present).toBeNull();
});

test('a bundle that fails on the recent ticks is not put to work, and the one at work stays', () => {
  const run = start(new MemoryDisk());
  offer(run, sealedOf(1));
  feed(run, 0, 40);
  const first = run.engine.serving!.checked.model;
  plantFailure(run, (model) => model !== first);
  expect(offer(run, sealedOf(2, { seed: 2 }))).toBe(false);
  expect(run.engine.serving!.checked.sequence).toBe(1);
  run.engine.stop();
  const again = start(run.disk);
  expect(again.engine.serving!.checked.sequence).toBe(1);
});
