/** The two-stage map from moments against the same regressions done on the rows themselves. */
import { describe, expect, it } from 'vitest';
import { findDirections } from '../../../trainer/identify/bottleneck.ts';
import type { Moments } from '../../../trainer/identify/moments.ts';
import { type Cell, type Layout, mapError, ownMap, twoStageMap } from '../../../trainer/identify/ridge.ts';
import { cholesky, solveCholesky } from '../../../trainer/linalg/cholesky.ts';
import { multiply, multiplyTransposed } from '../../../trainer/linalg/products.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const layout: Layout = { channelCount: 3, signalCount: 2, featureCount: 2, steps: 2 };
const p = 6;
const width = 4;
const rows = 80;
const groups = [
  { from: 1, to: 1 },
  { from: 2, to: 2 },
];
const both = [0, 1];
const bothSteps = (cell: Cell | null): (Cell | null)[] => [cell, cell];
const next = recurrence(5);
const uniform = (): number => next() / 2 ** 31 - 1;
const x = Float64Array.from({ length: rows * p }, uniform);
const y = Float64Array.from(
  { length: rows * width },
  (_, k) => x[Math.floor(k / width) * p + (k % p)]! + 0.3 * uniform(),
);
const moments: Moments = {
  origins: rows,
  features: multiplyTransposed(x, x, p, rows, p),
  future: multiplyTransposed(x, y, p, rows, width),
  energy: Float64Array.from({ length: width }, (_, j) => {
    let sum = 0;
    for (let t = 0; t < rows; t++) sum += y[t * width + j]! ** 2;
    return sum;
  }),
  featureSums: multiplyTransposed(new Float64Array(rows).fill(1), x, 1, rows, p),
  futureSums: multiplyTransposed(new Float64Array(rows).fill(1), y, 1, rows, width),
};

/** Ridge of one column on some features, row by row: penalty times each feature's own sum of squares. */
function byRows(columns: readonly number[], target: Float64Array, penalty: number): Float64Array {
  const n = columns.length;
  const gram = new Float64Array(n * n);
  const right = new Float64Array(n);
  for (let t = 0; t < rows; t++) {
    columns.forEach((f, a) => {
      right[a]! += x[t * p + f]! * target[t]!;
      columns.forEach((g, b) => {
        gram[a * n + b]! += x[t * p + f]! * x[t * p + g]!;
      });
    });
  }
  for (let a = 0; a < n; a++) gram[a * n + a]! *= 1 + penalty;
  solveCholesky(cholesky(gram, n), n, right, 1);
  return right;
}

describe('twoStageMap', () => {
  const map = twoStageMap(moments, layout, {
    groups,
    own: [bothSteps({ penalty: 0.1, kept: both }), bothSteps({ penalty: 0.4, kept: both })],
    cross: [bothSteps({ penalty: 3, kept: both }), bothSteps(null)],
  });

  it('is each signal on its own past and the inputs, then what is left on all', () => {
    for (let j = 0; j < width; j++) {
      const signal = Math.floor(j / 2);
      const own = signal === 0 ? [0, 1, 4, 5] : [2, 3, 4, 5];
      const target = Float64Array.from({ length: rows }, (_, t) => y[t * width + j]!);
      const first = byRows(own, target, signal === 0 ? 0.1 : 0.4);
      const expected = new Float64Array(p);
      own.forEach((f, a) => {
        expected[f] = first[a]!;
      });
      if (signal === 0) {
        const left = target.map((value, t) => value - own.reduce((sum, f, a) => sum + x[t * p + f]! * first[a]!, 0));
        byRows([0, 1, 2, 3, 4, 5], left, 3).forEach((weight, f) => {
          expected[f]! += weight;
        });
      }
      for (let f = 0; f < p; f++) expect(map[f * width + j]!).toBeCloseTo(expected[f]!, 12);
    }
  });

  it('learns each step with its own penalty and features, in both stages', () => {
    const mixed = twoStageMap(moments, layout, {
      groups,
      own: [
        [
          { penalty: 0.1, kept: [0] },
          { penalty: 0.4, kept: both },
        ],
        [null, { penalty: 0.2, kept: [1] }],
      ],
      cross: [
        [null, { penalty: 3, kept: [1] }],
        [{ penalty: 5, kept: [0] }, null],
      ],
    });
    const own: readonly (readonly [readonly number[], number])[] = [
      [[0, 4], 0.1],
      [[0, 1, 4, 5], 0.4],
      [[], 1],
      [[3, 5], 0.2],
    ];
    const cross: readonly (readonly [readonly number[], number] | null)[] = [
      null,
      [[1, 3, 5], 3],
      [[0, 2, 4], 5],
      null,
    ];
    own.forEach(([features, penalty], j) => {
      const target = Float64Array.from({ length: rows }, (_, t) => y[t * width + j]!);
      const expected = new Float64Array(p);
      byRows(features, target, penalty).forEach((weight, a) => {
        expected[features[a]!] = weight;
      });
      const left = target.map((value, t) => value - expected.reduce((sum, w, f) => sum + w * x[t * p + f]!, 0));
      const [more, heavier] = cross[j] ?? [[], 1];
      byRows(more, left, heavier).forEach((weight, a) => {
        expected[more[a]!]! += weight;
      });
      for (let f = 0; f < p; f++) expect(mixed[f * width + j]!).toBeCloseTo(expected[f]!, 12);
    });
  });

  it('has the error that its forecasts make', () => {
    const got = mapError(moments, layout, map);
    const forecast = multiply(x, map, rows, p, width);
    for (let j = 0; j < width; j++) {
      let sum = 0;
      for (let t = 0; t < rows; t++) sum += (y[t * width + j]! - forecast[t * width + j]!) ** 2;
      expect(got[j]!).toBeCloseTo(sum / rows, 12);
    }
  });

  it('holds a feature that never moves at zero', () => {
    const silent = { ...moments, features: moments.features.slice(), future: moments.future.slice() };
    for (let f = 0; f < p; f++) {
      silent.features[f * p + 1] = 0;
      silent.features[p + f] = 0;
    }
    silent.future.fill(0, width, 2 * width);
    const cell = { penalty: 0.1, kept: both };
    const weights = ownMap(silent, layout, groups, [bothSteps(cell), bothSteps(cell)]);
    expect(Array.from(weights.subarray(width, 2 * width))).toEqual([0, 0, 0, 0]);
    expect(weights.every((weight) => Number.isFinite(weight))).toBe(true);
  });
});

describe('findDirections', () => {
  it('gives states of unit variance that are not correlated, by either route', () => {
    const covariance = moments.features.map((sum) => sum / rows);
    const wide = { ...layout, steps: 6 };
    const stretched = Float64Array.from({ length: p * 12 }, (_, k) => Math.sin(k * k + 1));
    const narrow = twoStageMap(moments, layout, {
      groups,
      own: [bothSteps({ penalty: 0.1, kept: both }), bothSteps({ penalty: 0.4, kept: both })],
      cross: [bothSteps({ penalty: 3, kept: both }), bothSteps({ penalty: 3, kept: both })],
    });
    for (const [map, shape] of [
      [narrow, layout],
      [stretched, wide],
    ] as const) {
      const { directions, carried } = findDirections(covariance, map, shape, 4);
      const pushed = multiply(directions, covariance, 4, p, p);
      for (let a = 0; a < 4; a++) {
        for (let b = 0; b < 4; b++) {
          let product = 0;
          for (let f = 0; f < p; f++) product += pushed[a * p + f]! * directions[b * p + f]!;
          // The factor's ridge is 1e-9.
          expect(product).toBeCloseTo(a === b ? 1 : 0, 6);
        }
        if (a > 0) expect(carried[a]!).toBeLessThanOrEqual(carried[a - 1]!);
      }
    }
  });
});
