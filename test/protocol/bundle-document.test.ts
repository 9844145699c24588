import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import type { Bundle } from '../../protocol/bundle.ts';
import { bundleDigest, decodeBundle, encodeBundle } from '../../protocol/bundle-document.ts';
import { decode, encode } from '../../protocol/codec.ts';
import { quantiseTensor } from '../../protocol/tensor.ts';
import { refusalOf } from '../support/refusal.ts';
import { sampleBundle, tensorBytes } from '../support/sample-bundle.ts';

type Plain = Record<string, unknown>;

/** The document of a good bundle with one value changed, by keys and indices. */
const changed = (path: readonly (string | number)[], value: unknown): Uint8Array => {
  const document = decode(encodeBundle(sampleBundle())) as Plain;
  let inner: Plain = document;
  for (const step of path.slice(0, -1)) inner = inner[step] as Plain;
  const last = path.at(-1)!;
  if (value === undefined) delete inner[last];
  else inner[last] = value;
  return encode(document);
};

describe('a bundle document', () => {
  test('comes back as it was, frozen, and encodes to the same bytes again', () => {
    fc.assert(
      fc.property(
        fc.record({
          signals: fc.integer({ min: 1, max: 5 }),
          inputs: fc.integer({ min: 0, max: 3 }),
          horizon: fc.integer({ min: 3, max: 30 }),
          order: fc.integer({ min: 1, max: 9 }),
          basis: fc.integer({ min: 1, max: 5 }),
        }),
        fc.nat(),
        (shape, seed) => {
          const bundle = sampleBundle(shape, seed);
          const document = encodeBundle(bundle);
          const read = decodeBundle(document);
          expect(read).toStrictEqual(bundle);
          expect(encodeBundle(read)).toStrictEqual(document);
        },
      ),
      { seed: 20260303, numRuns: 60 },
    );
    const read = decodeBundle(encodeBundle(sampleBundle()));
    expect(Object.isFrozen(read.channels[0]!.limits)).toBe(true);
    expect(Object.isFrozen(read.linear?.decays)).toBe(true);
  });

  test('eight signals: all that is not tensor stays within 3 KiB', () => {
    const bundle = sampleBundle({ signals: 8, inputs: 0, horizon: 24, order: 24, basis: 8 });
    const document = encodeBundle(bundle);
    expect(document.length - tensorBytes(bundle)).toBeLessThan(3 * 1024);
  });

  test('its digest is that of the bytes, for one changed bit another', () => {
    const document = encodeBundle(sampleBundle());
    const digest = bundleDigest(document);
    expect(digest).toHaveLength(32);
    document[100]! ^= 1;
    expect(bundleDigest(document)).not.toStrictEqual(digest);
  });
});

describe('a bundle document is refused', () => {
  const tensor = (rows: number, cols: number, type: 'i8' | 'i16' | 'f32' = 'i8') =>
    ({ ...quantiseTensor(new Float64Array(rows * cols).fill(1), rows, cols, type) }) as unknown;

  test.each<[string, (string | number)[], unknown, string, string]>([
    ['of another format', ['format'], 2, 'format', 'format: this program reads 1, got 2'],
    ['of another arithmetic', ['arithmetic'], 9, 'format', 'arithmetic: this program reads 1, got 9'],
    ['without a format', ['format'], undefined, 'format', 'got nothing'],
    [
      'of an unknown kind',
      ['kind'],
      'cubic',
      'schema',
      'kind: expected "linear" or "dense" or "featured" or "switched" or "driven", got "cubic"',
    ],
    ['with a field missing', ['tickMs'], undefined, 'schema', 'tickMs: expected a number, got nothing'],
    ['with a field too many', ['ticksMs'], 1, 'schema', 'ticksMs is not a known key'],
    ['with a field too many inside', ['guard', 'extra'], 1, 'schema', 'guard.extra is not a known key'],
    ['with text for a number', ['channels', 'mean', 1], '3', 'schema', 'channels.mean[1]: expected a number, got "3"'],
    ['with a scale of 0', ['channels', 'scale', 0], 0, 'schema', 'channels.scale[0]: expected more than 0, got 0'],
    ['with a short schema hash', ['schema'], new Uint8Array(31), 'schema', 'schema: expected 32 bytes, got 31 bytes'],
    [
      'with a schema hash of other channels',
      ['schema'],
      new Uint8Array(32),
      'schema',
      'for these channels and this tick',
    ],
    ['without channels', ['channels', 'name'], [], 'schema', 'channels.name: expected at least 1 entries, got []'],
    [
      'with a column too short',
      ['channels', 'unit'],
      ['Cel'],
      'schema',
      'channels.unit: expected 3 entries, one a name, got 1',
    ],
    [
      'with one name twice',
      ['channels', 'name', 1],
      'signal-1',
      'schema',
      'channels[1].name: expected a name of its own',
    ],
    ['with an unfit name', ['site'], 'a/b', 'schema', 'site: expected a name of letters'],
    ['with a signal after an input', ['channels', 'role', 0], 'input', 'schema', 'expected signals before inputs'],
    [
      'with clip upside down',
      ['channels', 'clipLow', 0],
      96,
      'schema',
      'channels[0].clip: expected low below high, got [96, 95.3]',
    ],
    [
      'with chances of crossing that fall',
      ['bounds', 'crossing'],
      Array.from({ length: 15 }, (_, k) => (k === 4 ? 0 : k / 14)),
      'schema',
      'bounds.crossing: element 4: expected no less than the one before, got 0',
    ],
    [
      'with too few of them',
      ['bounds', 'crossing'],
      [0, 1],
      'schema',
      'bounds.crossing: expected at least 15 entries, got [0, 1]',
    ],
    [
      'with chances for other signals than it has',
      ['bounds', 'crossingBySignal'],
      [],
      'schema',
      'bounds.crossingBySignal: expected ',
    ],
    ['with limits upside down', ['channels', 'low', 0], 90, 'schema', 'channels[0].limits: expected levels that rise'],
    ['with a decay of 1', ['linear', 'decays', 2], 1, 'schema', 'linear.decays[2]: expected less than 1, got 1'],
    [
      'with a resonator that grows',
      ['linear', 'resonators', 0],
      [0.8, 0.6],
      'schema',
      'linear.resonators[0]: expected a modulus below 1',
    ],
    [
      'with lags out of order',
      ['linear', 'lags'],
      [1, 5, 5],
      'schema',
      'linear.lags[2]: expected a lag above 5, got 5',
    ],
    [
      'with a lag past the ring',
      ['linear', 'lags'],
      [1, 2, 50_000],
      'schema',
      'linear.lags[2]: expected at most 20160',
    ],
    [
      'with a feature more than tensors',
      ['linear', 'lags'],
      [1, 2, 3, 4],
      'tensor',
      'linear.featureExponents: expected 3 × 9, got 3 × 8',
    ],
    ['with scaled exponents', ['linear', 'featureExponents'], tensor(3, 8), 'schema', 'expected scale 1'],
    [
      'with a bottleneck of another width',
      ['linear', 'bottleneck'],
      tensor(4, 23),
      'tensor',
      'linear.bottleneck: expected 4 × 24, got 4 × 23',
    ],
    [
      'with a bottleneck of floats',
      ['linear', 'bottleneck'],
      tensor(4, 24, 'f32'),
      'tensor',
      'expected type i8 or i16, got f32',
    ],
    [
      'with a read-out of another order',
      ['linear', 'readout'],
      tensor(6, 5),
      'tensor',
      'linear.readout: expected 6 × 4, got 6 × 5',
    ],
    [
      'with an own part that leaves the input out',
      ['linear', 'own'],
      tensor(6, 8),
      'tensor',
      'linear.own: expected 6 × 16, got 6 × 8',
    ],
    [
      'with the level and tensors without it',
      ['linear', 'level'],
      true,
      'tensor',
      'linear.featureExponents: expected 3 × 9, got 3 × 8',
    ],
    [
      'with a basis of another horizon',
      ['linear', 'horizonBasis'],
      tensor(7, 3, 'i16'),
      'tensor',
      'linear.horizonBasis: expected 6 × 3, got 7 × 3',
    ],
    ['with another horizon than tensors', ['horizon'], 7, 'tensor', 'linear.horizonBasis: expected 7 × 3, got 6 × 3'],
    ['with bins and no period', ['seasonal', 'periodTicks'], 0, 'schema', 'seasonal.table: expected 1 to 1 columns'],
    [
      'with negative half-widths',
      ['bounds', 'radius'],
      { ...(quantiseTensor(new Float64Array(12).fill(-1), 2, 6, 'i16') as object) },
      'schema',
      'bounds.radius: element 0: expected a half-width >= 0',
    ],
    ['with coverage 1', ['bounds', 'coverage'], 1, 'schema', 'bounds.coverage: expected less than 1, got 1'],
    [
      'with a verdict too few',
      ['judge', 'verdicts'],
      ['good'],
      'schema',
      'judge.verdicts: expected 2 sentences, one a signal, got 1',
    ],
    [
      'with a judged step past the horizon',
      ['judge', 'horizons'],
      [1, 3, 7],
      'schema',
      'judge.horizons[2]: expected a step above 3 and up to 6, got 7',
    ],
    [
      'with skill of another shape',
      ['judge', 'rivals'],
      ['persistence'],
      'tensor',
      'judge.skill: expected 2 × 3, got 8 × 3',
    ],
    ['with an empty override', ['judge', 'override'], '', 'schema', 'judge.override: expected at least 1 characters'],
    [
      'with a probe path too short',
      ['probe', 'last'],
      [1],
      'schema',
      'probe.last: expected 6 numbers, one a step, got 1',
    ],
    ['with a span upside down', ['provenance', 'firstMs'], 8e15, 'schema', 'provenance.firstMs'],
    ['with a tick of a millisecond', ['tickMs'], 1, 'schema', 'tickMs: expected at least 100, got 1'],
  ])('%s', (_, path, value, code, message) => {
    const refusal = refusalOf(() => decodeBundle(changed(path, value)));
    expect(refusal.message).toContain(message);
    expect(refusal.code).toBe(code);
    expect(refusal.message.split('\n')).toHaveLength(1);
  });

  test.each([
    ['an array', []],
    ['text', 'bundle'],
    ['nothing', null],
  ])('when it is %s', (_, value) => {
    expect(refusalOf(() => decodeBundle(encode(value))).code).toBe('format');
  });

  test('before it is written, too', () => {
    const bundle: Bundle = { ...sampleBundle(), warmupTicks: -1 };
    expect(refusalOf(() => encodeBundle(bundle)).message).toContain('warmupTicks: expected at least 0, got -1');
    expect(refusalOf(() => encodeBundle({ ...sampleBundle(), format: 3 })).code).toBe('format');
    const large = sampleBundle({ signals: 40, inputs: 0, horizon: 600, order: 60, basis: 8 });
    expect(refusalOf(() => encodeBundle(large)).code).toBe('size');
  });

  test('cut short at any byte', () => {
    const document = encodeBundle(sampleBundle({ signals: 1, inputs: 0, horizon: 3 }));
    for (let length = 0; length < document.length; length++) {
      expect(refusalOf(() => decodeBundle(document.subarray(0, length))).code).toBe('scan');
    }
  });
});
