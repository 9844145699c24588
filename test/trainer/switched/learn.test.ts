/** What is learned of a tank whose pump, levels and inflow are known. */
import type { SwitchedSection } from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { learnSwitched } from '../../../trainer/switched/learn.ts';
import { findStops } from '../../../trainer/switched/stops.ts';
import { seededNumbers } from '../../support/models.ts';
import { TANK, tankHistory, tankInput } from '../../support/switched-plant.ts';

/** Where a pair's odds are even, in the level's unit. */
function threshold(section: SwitchedSection, from: number, to: number, scaling: { mean: number; scale: number }) {
  const pair = section.pairFrom.findIndex((mode, p) => mode === from && section.pairTo[p] === to);
  return scaling.mean - (scaling.scale * section.hazard[3 * pair]) / section.hazard[3 * pair + 1];
}

describe.each([
  ['every reading', 0],
  ['a fifth missing', 0.2],
] as const)('a tank with one pump, %s', (_, missing) => {
  const { input, scaling } = tankInput(tankHistory({ missing }), 5000);
  const section = learnSwitched(input)!;

  test('which signals do what', () => {
    expect(section.modeCount).toBe(2);
    expect(Array.from(section.discrete)).toEqual([1]);
    expect(Array.from(section.driven)).toEqual([0]);
  });

  test('the levels at which it starts and stops, to a fifth of what a tick moves', () => {
    expect(threshold(section, 0, 1, scaling[0])).toBeCloseTo(TANK.start, 1.4);
    expect(threshold(section, 1, 0, scaling[0])).toBeCloseTo(TANK.stop, 1.4);
  });

  test('what flows in and what the pump takes, to 3 %', () => {
    const [idle, pumping] = Array.from(section.drift, (drift) => drift * scaling[0].scale);
    expect(Math.abs((idle - pumping) / TANK.pump - 1)).toBeLessThan(0.03);
    expect(Math.abs(idle / TANK.inflow - 1)).toBeLessThan(0.1);
  });

  test('what the current is in each mode', () => {
    const [off, on] = Array.from(section.centre, (centre) => scaling[1].mean + centre * scaling[1].scale);
    expect(off).toBeCloseTo(0, 1);
    expect(on).toBeCloseTo(TANK.running, 0.5);
  });
});

describe('where it does not apply', () => {
  const T = 3000;
  const random = seededNumbers(4);
  const wander = (): Float64Array => {
    let x = 0;
    return Float64Array.from({ length: T }, () => {
      x = 0.98 * x + random() - 0.5;
      return x;
    });
  };
  test('no near-discrete signal', () => {
    expect(learnSwitched(tankInput([wander(), wander()], 2500).input)).toBeNull();
  });
  test('one that drives nothing', () => {
    const square = Float64Array.from({ length: T }, (_, t) => (Math.floor(t / 17) % 2) + 0.02 * random());
    expect(learnSwitched(tankInput([wander(), square], 2500).input)).toBeNull();
  });
  test('constant and silent signals', () => {
    expect(learnSwitched(tankInput([new Float64Array(T), wander()], 2500).input)).toBeNull();
    const silent = tankInput([wander(), wander()], 2500).input;
    silent.isRead[0].fill(0);
    expect(learnSwitched(silent)).toBeNull();
  });
});

test('a rare second pump is a mode of its own, and stronger than the first', () => {
  const history = tankHistory({ ticks: 12_000, secondStart: 2.3, seed: 7 });
  // Floods come and go: the inflow of every fifth stretch is more than one pump takes.
  const flooded = tankHistory({ ticks: 12_000, secondStart: 2.3, seed: 7, floodFrom: 4000, flood: 0.13 });
  const mixed = history.map((y, c) =>
    Float64Array.from([...y.subarray(0, 4000), ...flooded[c].subarray(4000, 6000), ...y.subarray(6000)]),
  );
  const { input, scaling } = tankInput(mixed, 11_000);
  const section = learnSwitched(input)!;
  expect(section.modeCount).toBe(3);
  const [idle, one, two] = Array.from(section.drift, (drift) => drift * scaling[0].scale);
  expect(idle).toBeGreaterThan(one);
  expect(one).toBeGreaterThan(two);
  expect(Math.abs((idle - two) / (2 * TANK.pump) - 1)).toBeLessThan(0.15);
});

describe('stops', () => {
  const read = new Uint8Array(4000).fill(1);
  test('an overflow is one, a peak is none', () => {
    const sine = Float64Array.from({ length: 4000 }, (_, t) => Math.sin(t / 50));
    expect(findStops(sine, read)).toMatchObject({ floor: Number.NEGATIVE_INFINITY, ceiling: Number.POSITIVE_INFINITY });
    const held = findStops(
      sine.map((value) => Math.min(value, 0.8)),
      read,
    );
    expect(held.ceiling).toBeCloseTo(0.8, 1);
    expect(held.floor).toBe(Number.NEGATIVE_INFINITY);
  });
});
