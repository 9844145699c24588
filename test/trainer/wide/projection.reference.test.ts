/**
 * Random projections against published statements, by seeded trials: Johnson and Lindenstrauss (1984) with the dimension of
 * Dasgupta and Gupta (2003), and the variance 2/k of a squared length's estimate from k numbers.
 */
import { describe, expect, test } from 'vitest';
import type { FeatureMap } from '../../../trainer/wide/feature-map.ts';
import {
  createProjection,
  johnsonLindenstrauss,
  PROJECTION_KINDS,
  sparseProjection,
} from '../../../trainer/wide/projection.ts';
import { openRandom } from '../../../trainer/wide/random.ts';
import { type WindowForm, WindowProjection } from '../../../trainer/wide/window-projection.ts';

const WIDTH = 40;
const HEIGHT = 24;
const PIXELS = WIDTH * HEIGHT;

/** A picture of a warm spot somewhere on a ramp, with noise. */
function picture(seed: number): Float32Array {
  const random = openRandom(seed, 4);
  const [x, y, size] = [WIDTH * random.uniform(), HEIGHT * random.uniform(), 1 + 4 * random.uniform()];
  return Float32Array.from({ length: PIXELS }, (_, k) => {
    const [dx, dy] = [(k % WIDTH) - x, Math.floor(k / WIDTH) - y];
    return 0.05 * dx + 5 * Math.exp(-(dx * dx + dy * dy) / (2 * size * size)) + 0.2 * random.normal();
  });
}

/** Two vectors that differ in two numbers: what is hardest for sums of few. */
function needle(seed: number): Float32Array {
  const random = openRandom(seed, 5);
  const v = new Float32Array(PIXELS);
  v[random.below(PIXELS)] += 1;
  v[random.below(PIXELS)] -= 1;
  return v;
}

function squareOf(v: ArrayLike<number>): number {
  let sum = 0;
  for (let k = 0; k < v.length; k++) sum += v[k] * v[k];
  return sum;
}

function projected(map: FeatureMap, v: Float32Array): Float32Array {
  const out = new Float32Array(map.outputs);
  map.apply(v, out);
  return out;
}

test('the dimension of Dasgupta and Gupta, by hand', () => {
  // 4 ln 1000 / (0.02 − 0.008/3) = 27.631 / 0.017333 = 1594.1; 90,000 points: 4 · 11.4076 / 0.0173333 = 2632.5.
  expect(johnsonLindenstrauss(1000, 0.2)).toBe(1595);
  expect(johnsonLindenstrauss(90_000, 0.2)).toBe(2633);
  expect(() => johnsonLindenstrauss(10, 1)).toThrow('between 0 and 1');
});

describe.each(PROJECTION_KINDS)('%s projection', (kind) => {
  test('keeps every distance among 40 pictures within the share that its dimension promises', () => {
    const share = 0.35;
    const outputs = 4 * Math.ceil(johnsonLindenstrauss(40, share) / 4);
    const pictures = Array.from({ length: 40 }, (_, seed) => picture(seed));
    for (const seed of [1, 2, 3]) {
      const map = createProjection({ inputs: PIXELS, outputs, seed }, kind);
      const small = pictures.map((one) => projected(map, one));
      for (let i = 0; i < 40; i++) {
        for (let j = 0; j < i; j++) {
          const before = squareOf(pictures[i].map((value, k) => value - pictures[j][k]));
          const after = squareOf(small[i].map((value, k) => value - small[j][k]));
          expect(Math.abs(after / before - 1)).toBeLessThan(share);
        }
      }
    }
  });

  test.each([
    ['pictures', picture],
    ['needles', needle],
  ] as const)('of %s the squared length is right on average, its variance at most 2/k', (_, make) => {
    const TRIALS = 300;
    const outputs = 128;
    const errors = Array.from({ length: TRIALS }, (_, seed) => {
      const v = make(seed);
      return (
        squareOf(projected(createProjection({ inputs: PIXELS, outputs, seed: seed + 1 }, kind), v)) / squareOf(v) - 1
      );
    });
    const mean = errors.reduce((sum, value) => sum + value, 0) / TRIALS;
    const variance = errors.reduce((sum, value) => sum + value * value, 0) / TRIALS;
    // 300 trials: the mean within 3.9 deviations, a variance of nearly normal errors within 3.9 √(2/300) = 32 %.
    expect(Math.abs(mean)).toBeLessThan(3.9 * Math.sqrt(2 / outputs / TRIALS));
    expect(variance).toBeLessThan((2 / outputs) * 1.32);
  });

  test('is linear, seeded, and refuses a shape it cannot have', () => {
    const map = createProjection({ inputs: PIXELS, outputs: 96, seed: 3 }, kind);
    const [a, b] = [picture(1), picture(2)];
    const sum = projected(
      map,
      a.map((value, k) => value - 2 * b[k]),
    );
    const [pa, pb] = [projected(map, a), projected(map, b)];
    // Single precision: sums of thousands of numbers of size 5.
    for (let j = 0; j < 96; j++) expect(Math.abs(sum[j] - (pa[j] - 2 * pb[j]))).toBeLessThan(1e-2);
    expect(projected(createProjection({ inputs: PIXELS, outputs: 96, seed: 3 }, kind), a)).toEqual(pa);
    expect(() => createProjection({ inputs: 0, outputs: 96, seed: 3 }, kind)).toThrow('inputs: expected 1 or more');
  });
});

test('the count sketch may lose a distance, which is why it is not the default', () => {
  const outputs = 128;
  const lost = Array.from({ length: 3000 }, (_, seed) => needle(seed)).filter((v) => {
    const length = squareOf(projected(COUNT_SKETCH, v));
    return length === 0 || length === 4;
  });
  // Two places meet once in 128 times: 23 of 3000 expected, 3.9 deviations to either side.
  expect(Math.abs(lost.length - 3000 / outputs)).toBeLessThan(3.9 * Math.sqrt(3000 / outputs));
});

const COUNT_SKETCH = sparseProjection({ inputs: PIXELS, outputs: 128, seed: 6 }, 1);

describe('a window of frames', () => {
  const FRAMES = 8;
  const windowOf = (form: WindowForm, seed: number): WindowProjection =>
    new WindowProjection({
      projection: createProjection({ inputs: PIXELS, outputs: 256, seed }),
      frames: FRAMES,
      form,
      seed,
    });

  test('beside: the frames, newest first', () => {
    const window = windowOf('beside', 1);
    const out = new Float32Array(window.outputs);
    for (let t = 0; t < 11; t++) {
      expect(window.isFull).toBe(t >= FRAMES);
      window.push(picture(t));
    }
    window.write(out);
    const map = createProjection({ inputs: PIXELS, outputs: 256, seed: 1 });
    for (let lag = 0; lag < FRAMES; lag++)
      expect(out.slice(lag * 256, (lag + 1) * 256)).toEqual(projected(map, picture(10 - lag)));
    expect(window.newest).toEqual(projected(map, picture(10)));
  });

  test.each([
    ['of unlike frames', (t: number, seed: number): Float32Array => picture(100 * seed + t), 2],
    ['of frames all alike', (_: number, seed: number): Float32Array => picture(seed), 4],
  ] as const)('summed, %s: squared lengths right on average, the variance within its promise', (_, frameAt, most) => {
    const TRIALS = 200;
    const errors = Array.from({ length: TRIALS }, (_, seed) => {
      const window = windowOf('summed', seed + 1);
      let square = 0;
      for (let t = 0; t < FRAMES; t++) {
        const frame = frameAt(t, seed);
        square += squareOf(frame);
        window.push(frame);
      }
      const out = new Float32Array(window.outputs);
      window.write(out);
      return squareOf(out) / square - 1;
    });
    const mean = errors.reduce((sum, value) => sum + value, 0) / TRIALS;
    const variance = errors.reduce((sum, value) => sum + value * value, 0) / TRIALS;
    expect(Math.abs(mean)).toBeLessThan(3.9 * Math.sqrt(most / 256 / TRIALS));
    expect(variance).toBeLessThan((most / 256) * (1 + 3.9 * Math.sqrt(2 / TRIALS)));
  });

  test('summed: the order of frames shows', () => {
    const [one, other] = [windowOf('summed', 2), windowOf('summed', 2)];
    for (let t = 0; t < FRAMES; t++) {
      one.push(picture(t));
      other.push(picture(FRAMES - 1 - t));
    }
    const [a, b] = [new Float32Array(256), new Float32Array(256)];
    one.write(a);
    other.write(b);
    let expected = 0;
    for (let t = 0; t < FRAMES; t++) expected += squareOf(picture(t).map((v, k) => v - picture(FRAMES - 1 - t)[k]));
    const measured = squareOf(a.map((value, j) => value - b[j]));
    expect(Math.abs(measured / expected - 1)).toBeLessThan(0.5);
  });

  test('is refused without frames', () => {
    expect(
      () =>
        new WindowProjection({
          projection: createProjection({ inputs: 4, outputs: 4, seed: 1 }),
          frames: 0,
          form: 'summed',
          seed: 1,
        }),
    ).toThrow('frames: expected 1 or more');
  });
});
