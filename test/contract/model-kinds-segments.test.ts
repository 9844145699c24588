/** Segments of every kind give the desk the very readings back, over restarts and a change to another kind. */
import { type Bundle, encodeBundle } from '@stillwell/protocol';
import { type Model, modelFromBundle } from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { replaySegment } from '../../trainer/desk/replay.ts';
import { bundleOfKind, EVERY_KIND, type KindName, readingsOfKind } from '../support/every-kind.ts';
import { roughReadings } from '../support/rough-readings.ts';
import { SegmentMaker } from '../support/segment-maker.ts';

const FIRST_TICK = 29_000_000;
const SEGMENT = 70;
const TICKS = 350;

/** Decodes what was made, in order; `models` by segment number. */
function replayAll(maker: SegmentMaker, modelOf: (number: number) => Model): void {
  let state: Uint8Array | null = null;
  for (const { number, bytes, firstTick, rows } of maker.made) {
    const replay = replaySegment(bytes, modelOf(number), state);
    expect(replay.head.firstTick).toBe(firstTick);
    expect([...replay.lattice]).toEqual(rows.flatMap((row) => [...row]));
    state = replay.endState;
  }
}

describe.each(EVERY_KIND)('%s', (name) => {
  const bundle = bundleOfKind(name);
  const model = modelFromBundle(bundle);
  const readings = readingsOfKind(name, model, TICKS, 13);

  test('readings come back exactly, over restarts in the midst of rounds and silences', () => {
    const maker = new SegmentMaker('marsh-lane', 'g1', encodeBundle(bundle), model);
    for (const [n, row] of readings.entries()) {
      maker.tick(FIRST_TICK + n, row);
      if (n % SEGMENT === SEGMENT - 1) maker.restart();
    }
    maker.close();
    expect(maker.made.length).toBe(TICKS / SEGMENT);
    replayAll(maker, () => model);
  });

  test('another model of the same channels is noticed', () => {
    const maker = new SegmentMaker('marsh-lane', 'g1', encodeBundle(bundle), model);
    for (const [n, row] of readings.slice(0, SEGMENT).entries()) maker.tick(FIRST_TICK + n, row);
    maker.close();
    const others: KindName[] =
      name === 'switched' ? ['linear'] : EVERY_KIND.filter((o) => o !== name && o !== 'switched');
    const choice = name === 'switched' ? { signals: ['level', 'current'], inputs: [] } : {};
    for (const other of others) {
      const wrong = modelFromBundle(bundleOfKind(other, choice));
      expect(() => replaySegment(maker.made[0]!.bytes, wrong, null), other).toThrow();
    }
  });
});

test('a change of kind at a tick boundary, each kind to the next, loses no tick', () => {
  const names = EVERY_KIND.filter((name) => name !== 'switched');
  const bundles: Bundle[] = names.map((name) => bundleOfKind(name));
  const models = bundles.map(modelFromBundle);
  const readings = roughReadings(models[0]!, names.length * 50, 17);
  const maker = new SegmentMaker('marsh-lane', 'g1', encodeBundle(bundles[0]!), models[0]!);
  for (const [n, row] of readings.entries()) {
    const at = Math.floor(n / 50);
    if (n % 50 === 0 && n > 0) maker.change(encodeBundle(bundles[at]!), models[at]!, FIRST_TICK, readings.slice(0, n));
    maker.tick(FIRST_TICK + n, row);
  }
  maker.close();
  expect(maker.made.map(({ firstTick }) => firstTick)).toEqual(names.map((_, k) => FIRST_TICK + 50 * k));
  replayAll(maker, (number) => models[number]!);
});
