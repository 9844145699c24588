/** Hours without a word, and an hour's backlog in one go: every tick is forecast from, by either clock. */
import { expect, test } from 'vitest';
import { BundleKeeper } from '../../runtime/bundle/change.ts';
import { Engine } from '../../runtime/engine.ts';
import { MemoryDisk } from '../support/memory-disk.ts';
import { FIRST_TICK, plantMessages, sealedOf, site, trusted } from '../support/running-site.ts';

const HOUR_TICKS = 60;
const plant = plantMessages(8 * HOUR_TICKS, 3, 0);

function start(): Engine {
  const disk = new MemoryDisk();
  const keeper = new BundleKeeper(disk, 'data', site, trusted);
  const options = { site, gateway: 'g1', disk, folder: 'data', segmentTicks: 60, spoolBytes: 1e9, note: () => {} };
  const engine = new Engine(options, keeper);
  const offered = keeper.offer(sealedOf(1), null);
  if (offered.outcome !== 'accepted') throw new Error(offered.outcome);
  engine.install(offered.checked);
  return engine;
}

function send(engine: Engine, from: number, to: number, nowMs: number | null): void {
  const notAfterMs = nowMs === null ? null : nowMs + site.latenessMs + site.tickMs;
  for (const { topic, payload, timeMs } of plant.slice(from, to).flat())
    engine.message(topic, payload, nowMs ?? timeMs, notAfterMs);
}

/** When a tick is due by the wall clock. */
const dueMs = (tick: number): number => (FIRST_TICK + tick + 1) * site.tickMs + site.latenessMs;

test('by the wall clock each tick of a silence of six hours is closed and forecast from, and a backlog corrects it', () => {
  const engine = start();
  send(engine, 0, HOUR_TICKS, dueMs(HOUR_TICKS - 1));
  engine.close(dueMs(HOUR_TICKS - 1));
  for (let tick = HOUR_TICKS; tick < 7 * HOUR_TICKS; tick++) {
    expect(engine.close(dueMs(tick))).toBe(1);
    engine.serving!.computeBounds();
    expect(engine.serving!.tick).toBe(FIRST_TICK + tick);
    expect([...engine.serving!.lower, ...engine.serving!.upper].every(Number.isFinite)).toBe(true);
  }
  const taken = engine.counters.readings;
  send(engine, 6 * HOUR_TICKS, 7 * HOUR_TICKS, dueMs(7 * HOUR_TICKS - 1));
  expect(engine.counters.readings - taken).toBe(3 * HOUR_TICKS);
  expect(engine.counters.corrections).toBe(3 * HOUR_TICKS);
  expect(engine.counters.refused).toEqual({});
  send(engine, 7 * HOUR_TICKS, 7 * HOUR_TICKS + 1, dueMs(7 * HOUR_TICKS));
  expect(engine.close(dueMs(7 * HOUR_TICKS))).toBe(1);
});

test("by the readings' clock silence closes nothing, and a backlog of an hour closes each of its ticks once", () => {
  const engine = start();
  send(engine, 0, HOUR_TICKS, null);
  engine.close(null);
  const closed = engine.counters.ticks;
  expect(engine.close(null)).toBe(0);
  send(engine, HOUR_TICKS, 2 * HOUR_TICKS, null);
  expect(engine.close(null)).toBe(HOUR_TICKS);
  expect(engine.counters.ticks).toBe(closed + HOUR_TICKS);
  expect(engine.counters.refused).toEqual({});
});
