import { createHash } from 'node:crypto';
import { readFileSync } from 'node:fs';
import { ARITHMETIC } from '@stillwell/protocol';
import { type LinearModel, runProbe } from '@stillwell/runtime/filter';
import { expect, test } from 'vitest';
import { syntheticModel } from '../../support/models.ts';

const model = syntheticModel({ inputs: ['valve'], horizon: 12 });
const digest = (at: LinearModel, seed: number, ticks: number): string =>
  createHash('sha256')
    .update(runProbe(at, seed, ticks).outputs)
    .digest('hex');

test('the same seed gives the same bytes, another seed others', () => {
  expect(digest(model, 7, 100)).toBe(digest(model, 7, 100));
  expect(digest(model, 8, 100)).not.toBe(digest(model, 7, 100));
  expect(digest(model, 0, 100)).toBe(digest(model, 2463534242, 100));
});

test.each([1, 8, 9, 100])('%i ticks: size as documented, all finite, last path at the end', (ticks) => {
  const { outputs, last } = runProbe(model, 5, ticks);
  const [nc, ny, H] = [3, 2, 12];
  expect(outputs.length).toBe(8 * (nc * (ticks - 1) + 3 * ny * H * Math.ceil(ticks / 8)));
  const numbers = new Float64Array(outputs.buffer);
  expect(numbers.every(Number.isFinite)).toBe(true);
  const end = numbers.length - 3 * ny * H;
  expect(last).toEqual(Array.from(numbers.subarray(end, end + H)));
});

test('a weight, a pole or a radius changed by one part in 2^40 shows', () => {
  const whole = digest(model, 7, 200);
  const nudged = (
    name: 'bottleneck' | 'readout' | 'horizonBasis' | 'decays' | 'resonatorIm' | 'radius',
  ): LinearModel => {
    const values = Float64Array.from(model[name]);
    values[1] *= 1 + 2 ** -40;
    return { ...model, [name]: values };
  };
  for (const name of ['bottleneck', 'readout', 'horizonBasis', 'decays', 'resonatorIm', 'radius'] as const) {
    expect(digest(nudged(name), 7, 200)).not.toBe(whole);
  }
});

test('the frozen bytes of arithmetic 1 come out again, on any machine', () => {
  const frozen = JSON.parse(readFileSync(new URL('../../vectors/probe-1.json', import.meta.url), 'utf8')) as {
    arithmetic: number;
    runs: readonly { seed: number; ticks: number; sha256: string }[];
  };
  expect(frozen.arithmetic).toBe(ARITHMETIC);
  expect(frozen.runs.length).toBeGreaterThan(2);
  for (const { seed, ticks, sha256 } of frozen.runs) expect(digest(model, seed, ticks)).toBe(sha256);
});
