/**
 * The gateway's inside with bundles of every kind: stopped by power cuts and started from what was on disk, it ends in the
 * same state and the same segments, which the desk decodes to the very readings; a bundle of another kind takes over at a
 * tick boundary.
 */
import { latticeIndex, parseSite, readSegmentHead, type Site, sealBundle } from '@stillwell/protocol';
import { type Model, modelFromBundle, saveBounds, saveState } from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { BundleKeeper } from '../../runtime/bundle/change.ts';
import { Engine } from '../../runtime/engine.ts';
import { replaySegment } from '../../trainer/desk/replay.ts';
import { bundleOfKind, documentOfKind, EVERY_KIND, type KindName, readingsOfKind } from '../support/every-kind.ts';
import { MemoryDisk, PowerCut } from '../support/memory-disk.ts';
import { seededNumbers } from '../support/models.ts';
import { author, FIRST_TICK, trusted } from '../support/running-site.ts';

const TICKS = 130;
const SEGMENT = 40;
const NONE = new Uint8Array(0);

/** A site for the channels of a kind's bundle. */
function siteOf(name: KindName): Site {
  const { channels } = bundleOfKind(name);
  const lines = (role: string): string[] =>
    channels
      .filter((channel) => channel.role === role)
      .flatMap(({ name: own, unit, lattice, aggregate }) => [
        `  - name: ${own}`,
        `    topic: plant/${own}`,
        '    payload: { json: /v, time: /t }',
        `    unit: ${unit}`,
        `    resolution: ${lattice.step}`,
        `    aggregate: ${aggregate}`,
      ]);
  const inputs = lines('input');
  const head = ['site: test-site', 'class: test', 'time_zone: UTC', 'tick: 1min', 'horizon: 24', 'lateness: 30s'];
  return parseSite(
    [...head, 'signals:', ...lines('signal'), ...(inputs.length > 0 ? ['inputs:', ...inputs] : []), ''].join('\n'),
    'site.yaml',
  );
}

/** One gateway's life: which kinds serve, in turn, and when. */
class Life {
  readonly site: Site;
  readonly readings: readonly Float64Array[];
  readonly models: readonly Model[];
  readonly #sealed: readonly Uint8Array[];
  disk = new MemoryDisk();
  engine!: Engine;
  #keeper!: BundleKeeper;

  constructor(kinds: readonly KindName[]) {
    this.site = siteOf(kinds[0]!);
    // The later bundle forecasts less far ahead: it need not be of the horizon before.
    const choices = kinds.map((_, k) => (k > 0 ? { horizon: 20 } : {}));
    this.models = kinds.map((name, k) => modelFromBundle(bundleOfKind(name, choices[k])));
    this.readings = readingsOfKind(kinds[0]!, this.models[0]!, TICKS, 23);
    this.#sealed = kinds.map((name, k) =>
      sealBundle(documentOfKind(name, choices[k]), { epoch: 1, sequence: k + 1 }, [author]),
    );
  }

  start(): void {
    const { disk, site } = this;
    this.#keeper = new BundleKeeper(disk, 'data', site, trusted);
    const stream = new Uint8Array(8).fill(9);
    const where = { site, gateway: 'g1', disk, folder: 'data', segmentTicks: SEGMENT, spoolBytes: 1e9, stream };
    this.engine = new Engine({ ...where, note: () => {} }, this.#keeper);
    if (this.engine.serving === null) this.change(0);
  }

  /** The bundle numbered `k` takes over. */
  change(k: number): void {
    const offered = this.#keeper.offer(this.#sealed[k]!, this.engine.serving?.checked ?? null);
    if (offered.outcome === 'known') return;
    if (offered.outcome !== 'accepted') throw new PowerCut(JSON.stringify(offered));
    this.engine.install(offered.checked);
    this.#keeper.serves(offered.checked);
  }

  /** Readings of ticks [from, to), each tick closed; every forecast is there at once. */
  feed(from: number, to: number): void {
    const channels = [...this.site.signals, ...this.site.inputs];
    for (let n = from; n < to; n++) {
      for (const [c, value] of this.readings[n]!.entries()) {
        if (Number.isNaN(value)) continue;
        const timeMs = (FIRST_TICK + n) * 60_000 + 7000 * c + 500;
        const payload = Buffer.from(JSON.stringify({ v: value, t: new Date(timeMs).toISOString() }));
        this.engine.message(`plant/${channels[c]!.name}`, payload, timeMs, null);
      }
      this.engine.close((FIRST_TICK + n + 1) * 60_000 + this.site.latenessMs);
      this.engine.settle();
      const { serving } = this.engine;
      expect(serving!.tick).toBe(FIRST_TICK + n);
      expect(serving!.median.every(Number.isFinite)).toBe(true);
    }
  }

  /** Process and power gone; whatever was not synced is lost. */
  powerCut(): void {
    this.disk = this.disk.afterPowerCut('nothing');
    this.start();
  }

  get next(): number {
    return (this.engine.aligner.nextTick ?? FIRST_TICK) - FIRST_TICK;
  }

  segments(): Uint8Array[] {
    return this.disk.list('data/spool').map((name) => this.disk.read(`data/spool/${name}`)!);
  }

  /** Everything that must be equal to the bit. */
  picture(): unknown {
    const { model, state, bounds } = this.engine.serving!;
    const hex = (bytes: Uint8Array): string => Buffer.from(bytes).toString('hex');
    return [saveState(model, state), saveBounds(model, bounds), ...this.segments()].map(hex);
  }

  /** Decodes every segment in turn and holds it against what was read. */
  expectExact(modelOf: (number: number) => Model): void {
    let state: Uint8Array | null = NONE;
    let tick = FIRST_TICK;
    for (const bytes of this.segments()) {
      const { number } = readSegmentHead(bytes);
      const model = modelOf(number);
      const replay = replaySegment(bytes, model, state);
      expect(replay.head.firstTick).toBe(tick);
      const nc = model.channelCount;
      for (let i = 0; i < replay.head.ticks; i++, tick++) {
        const expected = [...this.readings[tick - FIRST_TICK]!].map((value, c) =>
          latticeIndex(value, model.latticeStep[c]!, model.latticeOffset[c]!),
        );
        expect([...replay.lattice.subarray(i * nc, (i + 1) * nc)]).toEqual(expected);
      }
      state = replay.endState;
    }
    expect(tick).toBeGreaterThan(FIRST_TICK + TICKS - SEGMENT - 1);
  }
}

describe.each(EVERY_KIND)('%s', (name) => {
  test('power cuts at any moment change nothing, and the desk reads what was read', () => {
    const whole = new Life([name]);
    whole.start();
    whole.feed(0, TICKS);
    const expected = whole.picture();
    whole.expectExact((number) => whole.models[Math.min(number, 0)]!);
    const { operations } = whole.disk;
    const random = seededNumbers(5);
    for (let cut = 0; cut < 6; cut++) {
      const life = new Life([name]);
      life.disk.cutAt = Math.floor(random() * operations);
      try {
        life.start();
        life.feed(0, TICKS);
      } catch (error) {
        if (!(error instanceof PowerCut)) throw error;
      }
      life.powerCut();
      life.feed(life.next, TICKS);
      expect(life.picture()).toEqual(expected);
    }
  });
});

const OTHERS = EVERY_KIND.filter((name) => name !== 'switched');

test.each(OTHERS.map((name, k) => [name, OTHERS[(k + 1) % OTHERS.length]!] as const))(
  'from %s to %s at a tick boundary: no forecast missed, no reading lost, cut at any operation of the change',
  (one, other) => {
    const at = 60;
    const run = (cutAt: number): { picture: unknown; from: number; to: number } => {
      const life = new Life([one, other]);
      life.start();
      life.feed(0, at);
      const from = life.disk.operations;
      if (cutAt >= 0) life.disk.cutAt = from + cutAt;
      try {
        life.change(1);
      } catch (error) {
        if (!(error instanceof PowerCut)) throw error;
      }
      const to = life.disk.operations;
      if (cutAt >= 0) {
        life.powerCut();
        life.feed(life.next, at);
        life.change(1);
      }
      expect(life.engine.serving!.model.kind).toBe(life.models[1]!.kind);
      life.feed(at, TICKS);
      const changedAt = life.segments().findIndex((bytes) => readSegmentHead(bytes).firstTick === FIRST_TICK + at);
      life.expectExact((number) => life.models[number < changedAt ? 0 : 1]!);
      return { picture: life.picture(), from, to };
    };
    const quiet = run(-1);
    for (let cutAt = 0; cutAt < quiet.to - quiet.from; cutAt += 7) expect(run(cutAt).picture).toEqual(quiet.picture);
  },
);
