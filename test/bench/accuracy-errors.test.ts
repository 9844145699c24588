import { describe, expect, it } from 'vitest';
import { errorCells, geometricMean, learnScales } from './accuracy-errors.ts';

const data = {
  signals: ['a', 'b'],
  horizon: 2,
  values: [Float64Array.of(1, 3, 1, 3, 5), Float64Array.of(0, 0, 0, Number.NaN, 4)],
};

describe('errors of forecasts', () => {
  it('are averaged over origins by signal and step, in units of the scales', () => {
    const ahead = Float64Array.of(3, 3, 0, 0, 3, 7, 0, 2);
    // Origins 1 and 2: signal a meets 1, 3 and then 3, 5; signal b meets 0, nothing and then nothing, 4.
    expect([...errorCells(data, [1, 2], ahead, [2, 1])]).toEqual([0.5, 0.5, 0, 4]);
  });

  it('takes the scales from the first ticks alone', () => {
    expect(learnScales(data, 4)).toEqual([1, 0]);
  });

  it('has the geometric mean of a ratio and its inverse at 1', () => {
    expect(geometricMean([0.25, 4])).toBeCloseTo(1, 12);
  });
});
