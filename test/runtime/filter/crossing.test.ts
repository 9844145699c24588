import { createBounds, createState, crossing, forecastPath, type LinearModel, update } from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { gaussians } from '../../support/gaussian.ts';
import { seededNumbers, syntheticModel } from '../../support/models.ts';

const H = 60;
const SIGMA = 0.2;
const QUANTILE = 1.6448536;

/** A flat path at 0 with the error growth of e(h) = phi e(h−1) + w, sd of w SIGMA. */
const chainModel = (phi: number): { model: LinearModel; sds: number[] } => {
  const sds: number[] = [];
  let variance = 0;
  for (let h = 0; h < H; h++) {
    variance = phi * phi * variance + SIGMA * SIGMA;
    sds.push(Math.sqrt(variance));
  }
  const base = syntheticModel({ signals: ['level'], horizon: H });
  const model = {
    ...base,
    readout: new Float64Array(base.readout.length),
    radius: Float64Array.from(sds, (sd) => QUANTILE * sd),
    mean: Float64Array.of(5),
    scale: Float64Array.of(2),
    clipLow: Float64Array.of(-1e3),
    clipHigh: Float64Array.of(1e3),
  };
  return { model, sds };
};

/** Shares of simulated paths that have crossed by each step: the slow, obvious answer. */
const simulate = (phi: number, drift: number, limit: number): number[] => {
  const normal = gaussians(seededNumbers(17));
  const paths = 8000;
  const crossed = new Array<number>(H).fill(0);
  for (let p = 0; p < paths; p++) {
    let error = 0;
    for (let h = 0; h < H; h++) {
      error = phi * error + SIGMA * normal();
      if (drift * h + error <= limit) continue;
      for (let k = h; k < H; k++) crossed[k]++;
      break;
    }
  }
  return crossed.map((count) => count / paths);
};

const begin = (model: LinearModel) => {
  const state = createState(model);
  update(model, state, 0, Float64Array.of(5));
  const median = new Float64Array(H);
  forecastPath(model, state, median);
  return { state, bounds: createBounds(model), median };
};

describe('against simulated error chains', () => {
  test.each([1, 0.98, 0.9, 0.5])('phi %d', (phi) => {
    const { model } = chainModel(phi);
    const { state, bounds, median } = begin(model);
    for (const drift of [0, 0.01]) {
      for (const limit of [0.3, 0.6, 1, 1.5, 2.5]) {
        const path = median.map((y, h) => y + 2 * drift * h);
        const said = crossing(model, bounds, state, path, 0, 5 + 2 * limit, 'above');
        const truth = simulate(phi, drift, limit);
        // Method error up to 0.06, sampling error 0.006.
        expect(Math.abs(said.probability - truth[H - 1])).toBeLessThan(0.075);
        const step = truth.findIndex((share) => share > 0.5) + 1;
        // A crossing probability that hovers at one half has no sharp step.
        if (step > 0 && truth[H - 1] > 0.6) expect(Math.abs((said.step ?? H) - step)).toBeLessThanOrEqual(5);
        if (truth[H - 1] < 0.4) expect(said.step).toBeNull();
        // Of the paths that cross at all, few have by the earliest step, half by the likely one, most by the latest. Of a
        // chance said 0.06 off, shares of it are off by as much of it; seldom crossed, and there is nothing to hold against.
        if (truth[H - 1] > 0.3) {
          for (const [at, share] of [
            [said.earliest, 0.05],
            [said.likely, 0.5],
            [said.latest, 0.95],
          ] as const) {
            expect(truth[at! - 1] / truth[H - 1]).toBeGreaterThan(share - 0.12);
            expect(at === 1 ? 0 : truth[at! - 2] / truth[H - 1]).toBeLessThan(share + 0.12);
          }
        }
        // The mirror image is the same number.
        const mirrored = path.map((y) => 10 - y);
        const below = crossing(model, bounds, state, mirrored, 0, 5 - 2 * limit, 'below');
        expect(below.probability).toBeCloseTo(said.probability, 9);
      }
    }
  });
});

describe('ends of the scale', () => {
  const { model } = chainModel(1);
  const { state, bounds, median } = begin(model);

  test('far away: nothing; already beyond: at once', () => {
    expect(crossing(model, bounds, state, median, 0, 900, 'above')).toEqual({
      probability: 0,
      step: null,
      earliest: null,
      likely: null,
      latest: null,
    });
    const beyond = crossing(model, bounds, state, median, 0, 1, 'above');
    expect(beyond.probability).toBeGreaterThan(0.999);
    expect(beyond.step).toBe(1);
  });

  test('the nearer the limit, the more probable', () => {
    const chances = Array.from(
      { length: 60 },
      (_, k) => crossing(model, bounds, state, median, 0, 10 - 0.1 * k, 'above').probability,
    );
    for (let k = 1; k < chances.length; k++) expect(chances[k]).toBeGreaterThanOrEqual(chances[k - 1] - 1e-9);
    expect(chances.every((p) => p >= 0 && p <= 1)).toBe(true);
  });

  test('during a gap it stays a probability', () => {
    const gapped = begin(model);
    for (let n = 1; n < 3 * H; n++) update(model, gapped.state, n, Float64Array.of(Number.NaN));
    for (const limit of [-500, 4, 5, 6, 8, 500]) {
      const { probability } = crossing(model, gapped.bounds, gapped.state, median, 0, limit, 'above');
      expect(probability >= 0 && probability <= 1).toBe(true);
    }
  });
});
