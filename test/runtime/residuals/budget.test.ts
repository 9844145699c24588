/** What resolution is shed, from whom, how far, and when it comes back. */
import { describe, expect, test } from 'vitest';
import type { Model } from '../../../runtime/filter/index.ts';
import { modelFromBundle } from '../../../runtime/filter/index.ts';
import { ResolutionBudget } from '../../../runtime/residuals/budget.ts';
import { syntheticBundle } from '../../support/models.ts';

const model = modelFromBundle(syntheticBundle({ signals: ['a', 'b'], inputs: ['u'], tickMs: 60_000 }));
const DAY = 1440;

function budgetOf(bytesPerDay: number, spoolBytes = 1e9): ResolutionBudget {
  return new ResolutionBudget({ bytesPerDay, tickMs: 60_000, channelCount: 3, spoolBytes });
}

/** Closes an hour whose readings cost what residuals so large cost at the present coarseness, and 2 bytes a tick beside. */
function close(
  budget: ResolutionBudget,
  residualSteps: readonly number[],
  how: { waiting?: number; model?: Model } = {},
) {
  let bits = 16;
  residualSteps.forEach((steps, c) => {
    bits += Math.log2(Math.max(1, steps / 2 ** budget.coarseness[c]!)) + 2;
  });
  const bytes = (60 * bits) / 8;
  const facts = { startBytes: 0, ticks: 60, ticksBetweenStarts: 60 * 168, waitingBytes: how.waiting ?? 0 };
  budget.closed({ ...facts, bytes, residualSteps: Float64Array.from(residualSteps) }, how.model ?? model);
  return bytes / 60;
}

describe('a budget', () => {
  test('that suffices takes nothing', () => {
    const budget = budgetOf(100_000);
    for (let i = 0; i < 48; i++) close(budget, [500, 20, 3]);
    expect([...budget.coarseness]).toEqual([0, 0, 0]);
    expect(budget.isShort).toBe(false);
  });

  test('takes from whom has most, evenly beside the residuals, until the day fits, and then rests', () => {
    const budget = budgetOf(5000);
    for (let i = 0; i < 72; i++) close(budget, [512, 64, 4]);
    const after = [...budget.coarseness];
    const perTick = close(budget, [512, 64, 4]);
    expect(perTick * DAY).toBeLessThanOrEqual(5000);
    expect(perTick * DAY).toBeGreaterThan(0.85 * 5000);
    const left = [512, 64, 4].map((steps, c) => steps / 2 ** after[c]!);
    expect(Math.max(...left) / Math.min(...left)).toBeLessThanOrEqual(2);
    expect(after[2]).toBeLessThan(2);
    for (let i = 0; i < 72; i++) {
      close(budget, [512, 64, 4]);
      expect([...budget.coarseness]).toEqual(after);
    }
  });

  test('stops where a step is as large as what the model misses, and says that it does not suffice', () => {
    const budget = budgetOf(1024);
    for (let i = 0; i < 24; i++) close(budget, [512, 60, 0.5]);
    expect([...budget.coarseness]).toEqual([9, 5, 0]);
    expect(budget.isShort).toBe(true);
    expect(budget.projectedBytes).toBeGreaterThan(1024);
  });

  test('gives all back, coarsest first, when the plant grows calmer', () => {
    const budget = budgetOf(5000);
    for (let i = 0; i < 48; i++) close(budget, [512, 64, 4]);
    expect(budget.coarseness[0]).toBeGreaterThan(2);
    for (let i = 0; i < 48; i++) close(budget, [2, 2, 1]);
    expect([...budget.coarseness]).toEqual([0, 0, 0]);
  });

  test('counts starts in full as often as they come', () => {
    const budget = budgetOf(7000);
    const facts = {
      ticks: 60,
      waitingBytes: 0,
      residualSteps: Float64Array.of(512, 64, 4),
      ticksBetweenStarts: DAY * 7,
    };
    budget.closed({ ...facts, bytes: 14_200, startBytes: 14_000 }, model);
    expect(Math.round(budget.projectedBytes)).toBe((200 / 60) * DAY + 2000);
    expect([...budget.coarseness]).toEqual([0, 0, 0]);
    const tighter = budgetOf(6799);
    tighter.closed({ ...facts, bytes: 14_200, startBytes: 14_000 }, model);
    expect([...tighter.coarseness]).toEqual([1, 0, 0]);
  });
});

test('a spool that fills is rationed for thirty more days', () => {
  const spool = 300_000;
  const budget = budgetOf(100_000, spool);
  for (let i = 0; i < 24; i++) close(budget, [512, 64, 4], { waiting: spool / 2 });
  expect([...budget.coarseness]).toEqual([0, 0, 0]);
  for (let i = 0; i < 24; i++) close(budget, [512, 64, 4], { waiting: spool / 2 + 1 });
  expect(close(budget, [512, 64, 4], { waiting: spool / 2 + 1 }) * DAY).toBeLessThanOrEqual(5000);
  for (let i = 0; i < 24; i++) close(budget, [512, 64, 4], { waiting: 2 * spool });
  expect(budget.isShort).toBe(true);
});

describe('the guard against hanging sensors', () => {
  const stuck = {
    ticks: Int32Array.of(40, 8),
    rests: [Float64Array.of(12 * model.latticeStep[0]!), new Float64Array(0)],
  };
  const guarded: Model = { ...model, stuck: { ...stuck, acts: true } };

  test('keeps values at rest where they are, and short runs as they are', () => {
    const budget = budgetOf(1024);
    for (let i = 0; i < 24; i++) close(budget, [512, 512, 512], { model: guarded });
    expect([...budget.coarseness]).toEqual([model.latticeOffset[0] === 0 ? 2 : budget.coarseness[0]!, 0, 9]);
  });
});

test('a restart goes on where it stopped', () => {
  const one = budgetOf(5000);
  for (let i = 0; i < 5; i++) close(one, [512, 64, 4]);
  const two = budgetOf(5000);
  two.restore(one.state);
  for (let i = 0; i < 5; i++) for (const budget of [one, two]) close(budget, [512, 64, 4]);
  expect(two.state).toEqual(one.state);
  const other = new ResolutionBudget({ bytesPerDay: 5000, tickMs: 60_000, channelCount: 2, spoolBytes: 1e9 });
  other.restore(one.state);
  expect([...other.coarseness]).toEqual([0, 0]);
});
