/**
 * A month of an invented site through the gateway's inside, for one bundle: readings as they arrive, ticks, forecasts, bounds,
 * chances of crossing, state, segments. Digests of all of them, apart, so that a machine that computes otherwise tells where.
 *
 * Readings come of whole numbers and + - × ÷ alone, bundles of files: what differs between two machines is the gateway's.
 */
import { createHash, type Hash } from 'node:crypto';
import { type Bundle, type BundleChannel, latticeIndex, latticeValue, parseSite, type Site } from '@stillwell/protocol';
import { saveBounds, saveState } from '@stillwell/runtime/filter';
import { BundleKeeper } from '../../runtime/bundle/change.ts';
import { Engine } from '../../runtime/engine.ts';
import { outlooksOf } from '../../runtime/publish/outlooks.ts';
import { MemoryDisk } from '../support/memory-disk.ts';
import { trusted } from '../support/running-site.ts';

/** A minute each, which is what the bundles were made for: three days, and as many rows as a month of ten minutes. */
export const TICKS = 4320;
const TICK_MS = 60_000;
/** 2026-03-01T00:00:00Z */
const FIRST_TICK = Date.UTC(2026, 2, 1) / TICK_MS;
const SEGMENT_TICKS = 360;
/** Cosine and sine of a 144th of a turn: a swing by turning a pair of numbers, without a library's sine. */
const TURN = [0.9990482215818578, 0.043619387365336] as const;

/** Digests of what a month brought forth, in hex. */
export type MonthDigests = Readonly<Record<'readings' | 'forecasts' | 'chances' | 'state' | 'segments', string>>;

/** Runs the month. */
export function runMonth(bundle: Bundle, sealed: Uint8Array): MonthDigests {
  const site = siteOf(bundle);
  const disk = new MemoryDisk();
  const engine = startEngine(site, disk, sealed);
  const hash = { readings: createHash('sha256'), forecasts: createHash('sha256'), chances: createHash('sha256') };
  const state = createHash('sha256');
  const segments = createHash('sha256');
  const names = new Set<string>();
  for (const [n, messages] of monthMessages(bundle.channels).entries()) {
    for (const { channel, timeMs, value } of messages) {
      const payload = Buffer.from(JSON.stringify({ v: value, t: new Date(timeMs).toISOString() }));
      hash.readings.update(payload);
      engine.message(`plant/${bundle.channels[channel]!.name}`, payload, timeMs, null);
    }
    engine.close((FIRST_TICK + n + 1) * TICK_MS + site.latenessMs);
    engine.settle();
    addTick(engine, site, hash, state);
    for (const name of disk.list('data/spool')) {
      if (names.has(name)) continue;
      names.add(name);
      segments.update(disk.read(`data/spool/${name}`)!);
    }
  }
  if (names.size < TICKS / SEGMENT_TICKS - 1) throw new Error(`expected a segment a quarter day, got ${names.size}`);
  return {
    readings: hash.readings.digest('hex'),
    forecasts: hash.forecasts.digest('hex'),
    chances: hash.chances.digest('hex'),
    state: state.digest('hex'),
    segments: segments.digest('hex'),
  };
}

function startEngine(site: Site, disk: MemoryDisk, sealed: Uint8Array): Engine {
  const keeper = new BundleKeeper(disk, 'data', site, trusted);
  const where = { site, gateway: 'g1', disk, folder: 'data', segmentTicks: SEGMENT_TICKS, spoolBytes: 1e9 };
  const engine = new Engine({ ...where, stream: new Uint8Array(8).fill(9), note: () => {} }, keeper);
  const offered = keeper.offer(sealed, null);
  if (offered.outcome !== 'accepted') throw new Error(`the bundle was not taken: ${JSON.stringify(offered)}`);
  engine.install(offered.checked);
  return engine;
}

/** What subscribers hear of a tick, before it is rounded for them, and what the filter remembers of it. */
function addTick(engine: Engine, site: Site, hash: Record<'forecasts' | 'chances', Hash>, state: Hash): void {
  const serving = engine.serving!;
  if (serving.tick < 0) return;
  serving.computeBounds();
  for (const path of [serving.median, serving.lower, serving.upper]) hash.forecasts.update(bytesOf(path));
  for (const [i, { limits }] of site.signals.entries())
    for (const { probability, step } of outlooksOf(serving, serving.median, i, limits))
      hash.chances.update(bytesOf(Float64Array.of(probability, step ?? -1)));
  state.update(saveState(serving.model, serving.state));
  state.update(saveBounds(serving.model, serving.bounds));
}

function bytesOf(values: Float64Array): Uint8Array {
  return new Uint8Array(values.buffer, values.byteOffset, values.byteLength);
}

/** The site whose channels a bundle has, with limits that its readings cross now and then. */
export function siteOf({ site, equipmentClass, horizon, channels }: Bundle): Site {
  const linesOf = (role: string): string[] =>
    channels
      .filter((channel) => channel.role === role)
      .flatMap(({ name, unit, lattice, aggregate, mean, scale }) => [
        `  - name: ${name}`,
        `    topic: plant/${name}`,
        '    payload: { json: /v, time: /t }',
        `    unit: ${unit}`,
        `    resolution: ${lattice.step}`,
        `    aggregate: ${aggregate}`,
        ...(role === 'signal' ? [`    limits: { high: ${mean + scale}, low: ${mean - scale} }`] : []),
      ]);
  const head = [`site: ${site}`, `class: ${equipmentClass}`, 'time_zone: UTC', 'tick: 1min', `horizon: ${horizon}`];
  const inputs = linesOf('input');
  const rest = [
    'lateness: 30s',
    'signals:',
    ...linesOf('signal'),
    ...(inputs.length > 0 ? ['inputs:', ...inputs] : []),
  ];
  return parseSite([...head, ...rest, ''].join('\n'), 'site.yaml');
}

interface Reading {
  readonly channel: number;
  readonly timeMs: number;
  readonly value: number;
}

/** By tick of arrival: swings and wanders, spikes, jumps, sensors that hang, silences, readings that come late or twice. */
function monthMessages(channels: readonly BundleChannel[]): Reading[][] {
  const random = numbersFrom(2463534242);
  const arrivals: Reading[][] = Array.from({ length: TICKS }, () => []);
  for (const [channel, { mean, scale, lattice }] of channels.entries()) {
    let [x, y, wander, held] = [1 - 0.3 * channel, 0.2 * channel, 0, 0];
    for (let n = 0; n < TICKS; n++) {
      [x, y] = [TURN[0] * x - TURN[1] * y, TURN[1] * x + TURN[0] * y];
      wander = 0.97 * wander + 0.1 * (random() - 0.5);
      const jump = n % 1100 > 900 ? 0.8 : 0;
      const spike = random() < 0.002 ? 25 : 0;
      const free = mean + scale * (0.7 * x + wander + jump + spike);
      if (n % 500 > 12) held = free;
      const delay = random() < 0.01 ? 1 + Math.floor(random() * 5) : 0;
      const isTwice = random() < 0.02;
      const isMissing = random() < 0.03 || n % 900 > 870;
      if (isMissing) continue;
      const value = latticeValue(latticeIndex(held, lattice.step, lattice.offset), lattice.step, lattice.offset);
      const timeMs = (FIRST_TICK + n) * TICK_MS + 7000 * channel + 500;
      const arrival = arrivals[Math.min(TICKS - 1, n + delay)]!;
      arrival.push({ channel, timeMs, value });
      if (isTwice) arrival.push({ channel, timeMs, value });
    }
  }
  return arrivals;
}

/** Xorshift of 32 bits, Marsaglia (2003), Xorshift RNGs; from 0 to 1. */
function numbersFrom(seed: number): () => number {
  let x = seed | 0;
  return () => {
    x ^= x << 13;
    x ^= x >>> 17;
    x ^= x << 5;
    return (x >>> 0) / 4294967296;
  };
}
