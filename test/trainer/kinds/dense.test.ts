/** The dense kind, fitted: within its bytes, forgetting, as good as the bank it was reduced from, the same bytes each time. */
import { describe, expect, it } from 'vitest';
import { decodeBundle, dequantise } from '../../../protocol/index.ts';
import { createState, forecastPath, modelFromBundle, update } from '../../../runtime/filter/index.ts';
import type { Series } from '../../../trainer/history/series.ts';
import { FIT_DEFAULTS, type FitOptions, type FitResult, fit as fitHistory } from '../../../trainer/pipeline.ts';
import { hourlySite, seriesOf, wanderingDays } from '../../support/history.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const names = ['level', 'flow', 'outdoor'];
const days = wanderingDays(3, 1000, 21);
const series = seriesOf(names, days, 2);

function run(of: Series, options: Partial<FitOptions>): Promise<FitResult> {
  const site = hourlySite(of.names.slice(0, of.signalCount), 12, of.names.slice(of.signalCount));
  const lattices = of.names.map(() => ({ step: 0.01, offset: 0 }));
  return fitHistory(
    { series: of, site, survey: { note: 'none' }, lattices },
    { ...FIT_DEFAULTS, kind: 'dense', ...options },
  );
}

const mse = ({ hindcast }: FitResult): number =>
  hindcast.mseStandardised.reduce((sum, value) => sum + value, 0) / hindcast.mseStandardised.length;

describe('the dense kind', () => {
  it('is as good as the linear kind at the same limit, and rounding costs next to nothing', async () => {
    const [dense, linear] = [await run(series, {}), await run(series, { kind: 'linear' })];
    expect(dense.bundle.kind).toBe('dense');
    expect(dense.bundle.linear).toBeUndefined();
    expect(dense.document.length).toBeLessThan(24 * 1024);
    expect(dense.audit.ratio).toBeLessThan(1.003);
    // One split of 190 origins: a few parts in a hundred are chance.
    expect(mse(dense)).toBeLessThan(1.03 * mse(linear));
    expect(dense.verdicts.hasSkill).toBe(true);
  });

  it('holds a few kilobytes where the limit is low, poles inside the circle, and learns from all', async () => {
    const result = await run(series, { maxBytes: 5000, useAll: true });
    expect(result.document.length).toBeLessThanOrEqual(5000 - 56 - 4 * 72);
    const { pairs, poles } = decodeBundle(result.document).dense!;
    const values = dequantise(poles);
    for (let k = 0; k < values.length; k += k < 2 * pairs ? 2 : 1) {
      expect(Math.hypot(values[k]!, k < 2 * pairs ? values[k + 1]! : 0)).toBeLessThan(1);
    }
    expect(result.bundle.provenance.ticks).toBe(1000);
    expect(result.verdicts.hasSkill).toBe(true);
  });

  it('gives the same bytes for the same input', async () => {
    const [first, second] = [await run(series, { maxBytes: 6000 }), await run(series, { maxBytes: 6000 })];
    expect(Buffer.from(first.document).equals(second.document)).toBe(true);
  });

  it('fits a history with gaps, and what it forecasts without readings comes to rest', async () => {
    const next = recurrence(4);
    const gappy = days.map((y) => y.map((value) => (next() < 2 ** 32 * 0.2 ? Number.NaN : value)));
    const { bundle } = await run(seriesOf(names, gappy, 2), { maxBytes: 8000 });
    const model = modelFromBundle(bundle);
    const state = createState(model);
    const median = new Float64Array(2 * 12);
    for (let t = 0; t < 400; t++)
      update(
        model,
        state,
        t,
        Float64Array.from(days, (y) => y[t]!),
      );
    for (let t = 400; t < 900; t++) update(model, state, t, new Float64Array(3).fill(Number.NaN));
    forecastPath(model, state, median);
    const then = Float64Array.from(median);
    for (let t = 900; t < 924; t++) update(model, state, t, new Float64Array(3).fill(Number.NaN));
    forecastPath(model, state, median);
    median.forEach((value, k) => {
      expect(value).toBeCloseTo(then[k]!, 9);
    });
  });

  it('takes one signal without a period, and one that never moves', async () => {
    const walk = Float64Array.from(
      { length: 900 },
      (_, t) => Math.round(100 * (Math.sin(t / 7) + days[0]![t]! / 10)) / 100,
    );
    const still = new Float64Array(900).fill(3);
    const result = await run(seriesOf(['level', 'flow'], [walk, still], 2), { maxBytes: 6000 });
    expect(result.hindcast.mse.every(Number.isFinite)).toBe(true);
  });
});
