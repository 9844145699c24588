import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { decode, encode } from '../../protocol/codec.ts';
import { ProtocolError } from '../../protocol/errors.ts';

const SEED = 20260301;
const forbidden = new Set(['__proto__', 'constructor', 'prototype']);

const number = fc.oneof(
  fc.double({ noNaN: true, noDefaultInfinity: true }),
  fc.maxSafeInteger(),
  fc.integer(),
  fc.float({ noNaN: true, noDefaultInfinity: true }),
  fc.constantFrom(0, -0, 2 ** 53, -(2 ** 53), 5e-324, 1.7976931348623157e308),
);
const text = fc.oneof(
  fc.string({ unit: 'grapheme' }),
  fc.string({ unit: 'binary' }),
  fc.string({ minLength: 20, maxLength: 300 }),
);
const key = text.filter((one) => !forbidden.has(one));
const leaf = fc.oneof(fc.constant(null), fc.boolean(), number, text, fc.uint8Array({ maxLength: 300 }));
const { value } = fc.letrec<{ value: unknown }>((tie) => ({
  value: fc.oneof(
    { depthSize: 'small', maxDepth: 5 },
    leaf,
    fc.array(tie('value'), { maxLength: 20 }),
    fc.dictionary(key, tie('value'), { maxKeys: 20, noNullPrototype: true }),
  ),
}));

/** Values come in and out with keys in any order; order is not part of a value. */
const sorted = (input: unknown): unknown => {
  if (Array.isArray(input)) return input.map(sorted);
  if (typeof input !== 'object' || input === null || input instanceof Uint8Array) return input;
  return Object.fromEntries(
    Object.keys(input)
      .sort()
      .map((name) => [name, sorted((input as Record<string, unknown>)[name])]),
  );
};

describe('codec', () => {
  test('what goes in comes out, -0 and bytes included', () => {
    fc.assert(
      fc.property(value, (input) => {
        const output = decode(encode(input), { maxBytes: 1_000_000 });
        expect(sorted(output)).toStrictEqual(sorted(input));
      }),
      { seed: SEED, numRuns: 150 },
    );
  });

  test('the order of keys leaves no trace', () => {
    fc.assert(
      fc.property(fc.dictionary(key, leaf, { noNullPrototype: true }), (map) => {
        const reversed = Object.fromEntries(Object.entries(map).reverse());
        expect(encode(reversed)).toStrictEqual(encode(map));
      }),
      { seed: SEED },
    );
  });

  test('accepted bytes re-encode to themselves, whatever was done to them', () => {
    let accepted = 0;
    fc.assert(
      fc.property(value, fc.array(fc.tuple(fc.nat(), fc.nat(255)), { maxLength: 3 }), (input, edits) => {
        const bytes = encode(input);
        for (const [at, byte] of edits) bytes[at % bytes.length] = byte;
        let output: unknown;
        try {
          output = decode(bytes, { maxBytes: 1_000_000 });
        } catch (error) {
          // A passed scan whose decoding fails would be code 'decode': the scan is the wall.
          expect(error).toMatchObject({ name: 'ProtocolError', code: 'scan' });
          return;
        }
        accepted++;
        expect(encode(output)).toStrictEqual(bytes);
      }),
      { seed: SEED, numRuns: 500 },
    );
    expect(accepted).toBeGreaterThan(100);
  });

  test('random bytes in the wider form never reach a decoder failure', () => {
    fc.assert(
      fc.property(fc.uint8Array({ minLength: 1, maxLength: 60 }), (bytes) => {
        try {
          decode(bytes, {}, 'any');
        } catch (error) {
          expect(error).toBeInstanceOf(ProtocolError);
          expect((error as ProtocolError).code).toBe('scan');
        }
      }),
      { seed: SEED, numRuns: 1000 },
    );
  });
});
