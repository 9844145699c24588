/** Innovations as a filter would leave them, drawn from a seed; what is said of them. */
import { modelFromBundle } from '@stillwell/runtime/filter';
import { expect, test } from 'vitest';
import { signalsHealth } from '../../../runtime/publish/signals.ts';
import { Serving } from '../../../runtime/serving.ts';
import { BLOCK, BLOCK_LIMIT, expectedSpread, SignalWatch, SUM_LIMIT } from '../../../runtime/signals/watch.ts';
import { gaussians } from '../../support/gaussian.ts';
import { seededNumbers, syntheticBundle } from '../../support/models.ts';

const bundle = syntheticBundle({ signals: ['level', 'flow'] });
const model = modelFromBundle(bundle);
const FOLDED = 1;
const PASSED_OVER = 2;
const MISSING = 0;

function fresh(): Serving {
  return new Serving({ bundle, model, digest: new Uint8Array(32), epoch: 1, sequence: 1 });
}

/** Shows `watch` so many ticks; `share` gives innovations in expected spreads, NaN: no reading. */
function show(watch: SignalWatch, serving: Serving, ticks: number, share: (k: number, signal: number) => number): void {
  const spread = expectedSpread(serving);
  const { state } = serving;
  for (let k = 0; k < ticks; k++) {
    for (let i = 0; i < 2; i++) {
      const innovation = share(k, i) * spread[i]!;
      const isFar = Math.abs(innovation) > model.rejectSd * model.residualScale[i]!;
      state.innovation[i] = innovation;
      state.observed[i] = Number.isNaN(innovation) ? MISSING : isFar ? PASSED_OVER : FOLDED;
    }
    watch.observe(serving);
  }
}

function words(watch: SignalWatch, signal: number): string[] {
  const said = [
    ['noisy', watch.isNoisy(signal)],
    ['implausible', watch.isImplausible(signal)],
    ['jumping', watch.isJumping(signal)],
    ['drifting', watch.isDrifting(signal)],
  ] as const;
  return said.flatMap(([word, isSaid]) => (isSaid ? [word] : []));
}

test('nothing is said of thirty thousand sound readings, nor of heavy tails', () => {
  const normal = gaussians(seededNumbers(5));
  const watch = new SignalWatch(2);
  const serving = fresh();
  for (let part = 0; part < 100; part++) {
    // Student's t with four degrees of freedom, scaled to a variance of one, in the second signal.
    const heavy = (): number => (normal() / Math.sqrt(squares(normal, 4) / 4)) * Math.SQRT1_2;
    show(watch, serving, 300, (_, i) => (i === 0 ? normal() : heavy()));
    expect(words(watch, 0)).toEqual([]);
    expect(words(watch, 1)).toEqual([]);
  }
});

function squares(normal: () => number, count: number): number {
  let sum = 0;
  for (let k = 0; k < count; k++) sum += normal() ** 2;
  return sum;
}

test.each([
  ['noisy', 3 * BLOCK, (normal: () => number) => 3 * normal()],
  ['implausible', 3 * BLOCK, (normal: () => number) => 2.5 + 0.5 * normal()],
  ['drifting', 3 * Math.ceil(SUM_LIMIT), (normal: () => number) => 0.9 + normal()],
] as const)('%s is said within %d readings, of that signal alone, and taken back', (word, ticks, share) => {
  const normal = gaussians(seededNumbers(11));
  const watch = new SignalWatch(2);
  const serving = fresh();
  show(watch, serving, 2 * BLOCK, () => normal());
  show(watch, serving, ticks, (_, i) => (i === 1 ? share(normal) : normal()));
  expect(words(watch, 1)).toContain(word);
  expect(words(watch, 0)).toEqual([]);
  show(watch, serving, Math.ceil(3 * SUM_LIMIT) + 2 * BLOCK, () => normal());
  expect(words(watch, 1)).toEqual([]);
});

test('five in a hundred spikes are jumps, one level shift is none, however long it takes to be followed', () => {
  const far = (1.5 * model.rejectSd * model.residualScale[0]!) / expectedSpread(fresh())[0]!;
  const spiked = new SignalWatch(2);
  const serving = fresh();
  show(spiked, serving, 400, (k, i) => (i === 0 && k % 20 === 0 ? far : 0.1));
  expect(words(spiked, 0)).toEqual(['jumping']);
  expect(spiked.passedOver[0]).toBe(20);
  const shifted = new SignalWatch(2);
  show(shifted, serving, 50, (k, i) => (i === 0 && k > 10 ? far : 0.1));
  expect(words(shifted, 0)).not.toContain('jumping');
});

test('readings that stay away, and the first after them, say nothing of the spread', () => {
  const watch = new SignalWatch(2);
  show(watch, fresh(), 20 * BLOCK, (k) => (k % 2 === 0 ? Number.NaN : 5));
  expect(words(watch, 0)).not.toContain('noisy');
  expect(words(watch, 0)).not.toContain('implausible');
});

test('bounds of blocks are those of a million readings at least', () => {
  // R 4.2.2: qchisq(6e-5, 60, lower.tail = FALSE) / 60
  expect(BLOCK_LIMIT).toBeGreaterThanOrEqual(111.576149366 / 60);
});

test('health lists every signal, a good one by name and age alone', () => {
  const normal = gaussians(seededNumbers(3));
  const watch = new SignalWatch(2);
  const serving = fresh();
  show(watch, serving, 3 * BLOCK, (_, i) => (i === 1 ? 3 * normal() : normal()));
  serving.state.age.fill(0);
  watch.refused[1] = 4;
  expect(words(watch, 1)).toContain('noisy');
  expect(signalsHealth(serving, watch, Float64Array.of(9_000, Number.NaN), 12_400)).toEqual([
    { signal: 'level', last_reading_s: 3 },
    {
      signal: 'flow',
      last_reading_s: null,
      quality: 'M',
      reason: expect.stringMatching(/^scatters [0-9.]+ times as much as when it was calibrated$/),
      words: words(watch, 1),
      refused: 4,
      passed_over: watch.passedOver[1],
    },
  ]);
});
