/** What losing a reading costs, on a model whose weights say it exactly. */
import { describe, expect, test } from 'vitest';
import { reliance } from '../../../trainer/judge/reliance.ts';
import { seriesOf } from '../../support/history.ts';
import { syntheticModel, syntheticReadings } from '../../support/models.ts';

const base = syntheticModel({ horizon: 6, rejectSd: 1e9 });
// Nothing is read from the features of the second signal.
const bottleneck = base.bottleneck.map((w, k) => (k % (2 * base.featureCount) < base.featureCount ? 5 * w : 0));
const model = { ...base, bottleneck };
const readings = syntheticReadings(model, 900, 3);
const series = seriesOf(
  ['level', 'flow'],
  [0, 1].map((c) => Float64Array.from(readings, (row) => row[c]!)),
);

describe('reliance', () => {
  const found = reliance(model, series, { fromTick: 300, toTick: 900 })!;
  const ratio = (signal: number, lost: number): number => found.ratio[signal * 2 + lost]!;

  test('a reading nobody reads costs others nothing, one that is read does, and its own loss costs most', () => {
    expect(ratio(0, 1)).toBe(1);
    expect(ratio(1, 0)).not.toBe(1);
    expect(ratio(0, 0)).toBeGreaterThan(1.2);
    expect(ratio(1, 1)).toBeGreaterThan(1.2);
    expect(found.channels).toEqual(['level', 'flow']);
  });

  test('too little time says nothing', () => {
    expect(reliance(model, series, { fromTick: 870, toTick: 900 })).toBeNull();
  });
});
