/** Which readings are believed: a matter of what is learned from, never of what judges. */
import { describe, expect, it } from 'vitest';
import type { History } from '../../../trainer/history/history.ts';
import { prepare } from '../../../trainer/history/load.ts';
import { asTheGateway } from '../../../trainer/history/plausible.ts';
import { layOnTicks } from '../../../trainer/history/ticks.ts';
import { signal, site } from './support.ts';

const TICKS = 1000;
const LEARNED = 800;

function history(change: (value: number, n: number) => number): History {
  const times = Float64Array.from({ length: TICKS }, (_, n) => n * 60_000);
  const values = Float64Array.from(times, (_, n) => change(Math.round(10 * Math.sin(n / 5)), n));
  return { channels: [{ name: 'level', times, values }], signalCount: 1, files: [], zone: null, clockChanges: [] };
}

const laid = (change: (value: number, n: number) => number, judgedShare: number) =>
  prepare(history(change), site(['level']), judgedShare).series.values[0]!;

describe('readings absurdly far from all others', () => {
  const wild = (value: number, n: number): number => (n === 100 || n === 900 ? 1e12 : value);

  it('are left out of what is learned; what judges is taken as the gateway takes it', () => {
    const values = laid(wild, 0.2);
    expect(values[100]).toBeNaN();
    expect(values[900]).toBe(1e12);
    expect(laid(wild, 0)[900]).toBeNaN();
    expect(layOnTicks(history(wild), site(['level']), undefined, asTheGateway(site(['level']))).values[0]![100]).toBe(
      1e12,
    );
  });

  it('are told by readings that are learned from alone', () => {
    const calm = laid((value, n) => (n === 100 ? 1e5 : value), 0.2);
    const later = laid((value, n) => (n === 100 ? 1e5 : n >= LEARNED ? value * 1e5 : value), 0.2);
    expect(calm[100]).toBeNaN();
    expect(later.subarray(0, LEARNED)).toEqual(calm.subarray(0, LEARNED));
    // Told by all readings, the later ones would have made it believable.
    expect(laid((value, n) => (n === 100 ? 1e5 : n >= LEARNED ? value * 1e5 : value), 0)[100]).toBe(1e5);
  });

  it('a declared range holds everywhere', () => {
    const declared = site([signal('level', { range: [-20, 20] })]);
    const values = prepare(history(wild), declared, 0.2).series.values[0]!;
    expect([values[100], values[900]]).toEqual([Number.NaN, Number.NaN]);
    expect(layOnTicks(history(wild), declared, undefined, asTheGateway(declared)).values[0]![100]).toBeNaN();
  });

  it('nothing is taken that no lattice can hold', () => {
    expect(laid((value, n) => (n === 900 ? 1e300 : value), 0.2)[900]).toBeNaN();
  });
});
