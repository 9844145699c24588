/**
 * The state of systems whose poles are known. Poles of a damped oscillator sampled every T: exp(T(−ζω ± iω√(1 − ζ²))), as any
 * textbook of vibrations or control has it (Franklin, Powell & Emami-Naeini, Feedback Control of Dynamic Systems, section 3.3).
 */
import { EigenvalueDecomposition } from 'ml-matrix';
import { describe, expect, it } from 'vitest';
import { cholesky, solveCholesky } from '../../../trainer/linalg/cholesky.ts';
import { multiply, multiplyTransposed } from '../../../trainer/linalg/products.ts';
import { toMatrix } from '../../../trainer/linalg/solve.ts';
import { IncrementalSvd, type SvdFactors } from '../../../trainer/wide/incremental-svd.ts';
import { type JointLayout, predictiveState } from '../../../trainer/wide/predictive-state.ts';
import { openRandom } from '../../../trainer/wide/random.ts';
import { clipRadius, MOST_RADIUS } from '../../../trainer/wide/spectral-clip.ts';

/** Two oscillators: sampled poles as moduli and angles. */
const POLES = [
  { zeta: 0.02, omega: 2 * Math.PI * 0.05 },
  { zeta: 0.05, omega: 2 * Math.PI * 0.12 },
].map(({ zeta, omega }) => ({
  modulus: Math.exp(-zeta * omega),
  angle: omega * Math.sqrt(1 - zeta * zeta),
}));

/** Oscillators seen by `outputs` sensors, driven by noise or left to ring; new random state every `restart` ticks. */
function observe(ticks: number, outputs: number, drive: number, noise: number, restart: number): Float64Array[] {
  const random = openRandom(5);
  const mix = Array.from({ length: outputs }, () => POLES.flatMap(() => [random.normal(), random.normal()]));
  const state = new Float64Array(2 * POLES.length);
  return Array.from({ length: ticks }, (_, t) => {
    if (t % restart === 0) for (let k = 0; k < state.length; k++) state[k] = random.normal();
    POLES.forEach(({ modulus, angle }, k) => {
      const [u, v] = [state[2 * k], state[2 * k + 1]];
      state[2 * k] = modulus * (u * Math.cos(angle) - v * Math.sin(angle)) + drive * random.normal();
      state[2 * k + 1] = modulus * (u * Math.sin(angle) + v * Math.cos(angle)) + drive * random.normal();
    });
    return Float64Array.from(mix, (row) => row.reduce((sum, f, k) => sum + f * state[k], noise * random.normal()));
  });
}

const windowLayout = (outputs: number, window: number, horizon: number): JointLayout => ({
  past: { from: 0, to: outputs * window },
  next: { from: outputs, to: outputs * (window + 1) },
  future: { from: outputs * window, to: outputs * (window + horizon) },
  outputs,
});

function joint(readings: readonly Float64Array[], window: number, horizon: number, restart: number): Float64Array[] {
  const rows: Float64Array[] = [];
  const span = window + horizon;
  for (let t = 0; t + span <= readings.length; t++) {
    if (Math.floor(t / restart) !== Math.floor((t + span - 1) / restart)) continue;
    rows.push(Float64Array.from(readings.slice(t, t + span).flatMap((reading) => Array.from(reading))));
  }
  return rows;
}

function factorsOf(rows: readonly Float64Array[], rank: number): SvdFactors {
  const svd = new IncrementalSvd({ columns: rows[0].length, rank });
  for (const row of rows) svd.push(row);
  return svd.factors();
}

/** Largest distance of a true pole from the nearest one found. */
function poleError(transition: Float64Array, order: number): number {
  const { realEigenvalues: re, imaginaryEigenvalues: im } = new EigenvalueDecomposition(
    toMatrix(transition, order, order),
  );
  return Math.max(
    ...POLES.map(({ modulus, angle }) =>
      Math.min(...re.map((r, k) => Math.hypot(r - modulus * Math.cos(angle), im[k] - modulus * Math.sin(angle)))),
    ),
  );
}

describe('predictive state of a linear system', () => {
  it('has its poles exactly where nothing disturbs it', () => {
    const rows = joint(observe(400, 3, 0, 0, 40), 6, 5, 40);
    const found = predictiveState(factorsOf(rows, 4), windowLayout(3, 6, 5), 8);
    expect(found.order).toBe(4);
    // The least ridge, 1e-10 of a column, is what is left.
    expect(poleError(found.transition, 4)).toBeLessThan(1e-6);
    expect(found.explained.reduce((sum, share) => sum + share, 0)).toBeCloseTo(1, 6);
  });

  it('has them within the scatter of a noisy record, from factors of a low rank', () => {
    const rows = joint(observe(6000, 3, 0.1, 0.3, 1e9), 12, 12, 1e9);
    const found = predictiveState(factorsOf(rows, 12), windowLayout(3, 12, 12), 4);
    expect(poleError(found.transition, 4)).toBeLessThan(0.03);
    expect(found.filterRadius).toBeLessThan(1);
  });

  it('forecasts as its recursion does: F of the step after is F A', () => {
    const rows = joint(observe(400, 3, 0, 0, 40), 6, 5, 40);
    const { forecastMap, transition, order } = predictiveState(factorsOf(rows, 4), windowLayout(3, 6, 5), 4);
    const first = forecastMap.slice(0, 3 * order);
    const second = multiply(first, transition, 3, order, order);
    second.forEach((value, k) => {
      expect(Math.abs(value - forecastMap[3 * order + k])).toBeLessThan(1e-5);
    });
  });
});

describe('beside direct regression on the rows', () => {
  const [outputs, window, horizon] = [2, 4, 3];
  const rows = joint(observe(600, outputs, 0.2, 0.5, 1e9), window, horizon, 1e9);
  const layout = windowLayout(outputs, window, horizon);
  const columns = outputs * (window + horizon);
  const width = outputs * window;

  /** All singular values kept, all states kept: the state carries all of the regression of the future on the past. */
  it('gives the same forecasts where nothing was let go', () => {
    const found = predictiveState(factorsOf(rows, columns), layout, outputs * horizon);
    const past = Float64Array.from(rows.flatMap((row) => Array.from(row.subarray(0, width))));
    const future = Float64Array.from(rows.flatMap((row) => Array.from(row.subarray(width))));
    const solved = multiplyTransposed(past, future, width, rows.length, columns - width);
    const energy = multiplyTransposed(past, past, width, rows.length, width);
    solveCholesky(cholesky(energy, width), width, solved, columns - width);
    const ours = multiply(found.forecastMap, found.stateMap, columns - width, found.order, width);
    for (let i = 0; i < columns - width; i++) {
      for (let j = 0; j < width; j++)
        expect(Math.abs(ours[i * width + j] - solved[j * (columns - width) + i])).toBeLessThan(1e-6);
    }
  });

  it('has states of unit variance', () => {
    const found = predictiveState(factorsOf(rows, columns), layout, 3);
    for (let k = 0; k < 3; k++) {
      let square = 0;
      for (const row of rows) {
        let x = 0;
        for (let j = 0; j < width; j++) x += found.stateMap[k * width + j] * row[j];
        square += x * x;
      }
      expect(square / rows.length).toBeCloseTo(1, 6);
    }
  });

  it('gives the energy let go back as a ridge, which shrinks what a low rank would overrate', () => {
    const low = factorsOf(rows, 3);
    const found = predictiveState(low, layout, 2);
    const bare = predictiveState({ ...low, discarded: 0 }, layout, 2);
    expect(found.ridge).toBeGreaterThan(0.99 * (low.discarded / columns));
    const size = ({ forecastMap, stateMap, order }: typeof found): number =>
      Math.hypot(...multiply(forecastMap, stateMap, columns - width, order, width));
    expect(size(found)).toBeLessThan(size(bare));
  });
});

describe('a recursion that would run away', () => {
  it('is brought inside the circle, its period kept, and the radius told', () => {
    const { matrix, radius } = clipRadius(Float64Array.of(0.8, -0.8, 0.8, 0.8), 2);
    expect(radius).toBeCloseTo(0.8 * Math.SQRT2, 12);
    expect(Math.hypot(matrix[0], matrix[1])).toBeCloseTo(MOST_RADIUS, 12);
    expect(matrix[2] / matrix[0]).toBeCloseTo(1, 12);
  });

  it('is left alone where it is stable', () => {
    const a = Float64Array.of(0.5, 0.1, 0, 0.4);
    expect(clipRadius(a, 2).matrix).toBe(a);
    expect(() => clipRadius(Float64Array.of(Number.NaN), 1)).toThrow('not finite');
  });
});

it('refuses spans that do not fit', () => {
  const factors = factorsOf(joint(observe(50, 1, 0.1, 0.1, 1e9), 3, 2, 1e9), 2);
  const layout = windowLayout(1, 3, 2);
  expect(() => predictiveState(factors, { ...layout, future: { from: 3, to: 9 } }, 2)).toThrow(
    'future: expected columns',
  );
  expect(() => predictiveState(factors, { ...layout, next: { from: 1, to: 3 } }, 2)).toThrow('as many columns as past');
  expect(() => predictiveState(factors, { ...layout, outputs: 3 }, 2)).toThrow('a multiple of 3');
  expect(() => predictiveState(factors, layout, 0)).toThrow('order');
});
