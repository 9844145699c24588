/** Hostile MessagePack: each refused by the scan with its offset, quickly, before the decoder sees it. */
import { Packr } from 'msgpackr';
import { describe, expect, test } from 'vitest';
import { decode, encode } from '../../protocol/codec.ts';
import { refusalOf } from '../support/refusal.ts';

const bytes = (text: string): Uint8Array => Uint8Array.from(Buffer.from(text.replace(/ /g, ''), 'hex'));
const both = ['own', 'any'] as const;

describe.each(both)('refused in the form "%s"', (form) => {
  test.each([
    ['no bytes at all', '', 'cut short'],
    ['a second value behind the first', '0000', '1 further bytes'],
    ['a text longer than the data', 'a5 6162', 'cut short'],
    ['a huge text length', 'db ffffffff', 'cut short'],
    ['a huge binary length', 'c6 ffffffff', 'cut short'],
    ['a huge array', 'dd ffffffff', 'at most 32768 values'],
    ['a huge map', 'df ffffffff', 'at most 32768 values'],
    ['an array longer than the data', 'dc 4000 00', 'cut short'],
    ['a map with an integer key', '81 01 02', 'expected a string as map key'],
    ['a map with a nil key', '81 c0 02', 'expected a string as map key'],
    ['a map with a map as key', '81 80 02', 'expected a string as map key'],
    ['a repeated key', '82 a161 01 a161 02', 'appears twice'],
    ['__proto__', `81 a9 ${Buffer.from('__proto__').toString('hex')} 80`, '"__proto__" is not allowed'],
    ['constructor', `81 ab ${Buffer.from('constructor').toString('hex')} 80`, '"constructor" is not allowed'],
    ['prototype', `81 a9 ${Buffer.from('prototype').toString('hex')} 80`, '"prototype" is not allowed'],
    ['NaN as float 64', 'cb 7ff8000000000000', 'finite number, got NaN'],
    ['a signalling NaN', 'cb 7ff0000000000001', 'finite number, got NaN'],
    ['infinity as float 64', 'cb 7ff0000000000000', 'finite number, got Infinity'],
    ['NaN as float 32', 'ca 7fc00000', 'finite number, got NaN'],
    ['-infinity as float 32', 'ca ff800000', 'finite number, got -Infinity'],
    ['2^53 as uint 64', 'cf 0020000000000000', '2^53 - 1'],
    ['2^64 - 1', 'cf ffffffffffffffff', '2^53 - 1'],
    ['-2^53 as int 64', 'd3 ffe0000000000000', '2^53 - 1'],
    ['-2^63', 'd3 8000000000000000', '2^53 - 1'],
    ['a lone continuation byte', 'a1 80', 'malformed'],
    ['an overlong slash', 'a2 c0af', 'malformed'],
    ['half a surrogate pair', 'a3 eda080', 'malformed'],
    ['malformed text in a key', '81 a1ff 00', 'malformed'],
    ['an integer cut short', 'ce 0001', 'cut short'],
    ['a key without a value', '81 a161', 'cut short'],
  ])('%s', (_, text, why) => {
    const refusal = refusalOf(() => decode(bytes(text), {}, form));
    expect(refusal.code).toBe('scan');
    expect(refusal.message).toMatch(/^MessagePack byte \d+: /);
    expect(refusal.message).toContain(why);
    expect(refusal.details.offset).toBeTypeOf('number');
  });

  test('nesting past the limit, without using the stack', () => {
    const deep = new Uint8Array(60_000).fill(0x91);
    const started = performance.now();
    expect(refusalOf(() => decode(deep, {}, form)).message).toContain('byte 8: expected at most 8 levels');
    expect(performance.now() - started).toBeLessThan(50);
    // With the limit out of the way it still ends at the missing value, not in a stack overflow.
    expect(refusalOf(() => decode(deep, { maxDepth: 100_000, maxItems: 100_000 }, form)).message).toContain(
      'cut short',
    );
  });

  test('more values than the limit', () => {
    const wide = encode(Array.from({ length: 12 }, () => Array(12).fill(0)));
    expect(refusalOf(() => decode(wide, { maxItems: 100 }, form)).message).toContain('at most 100 values');
  });

  test('more bytes than the limit, by its own code', () => {
    const refusal = refusalOf(() => decode(new Uint8Array(65_537), {}, form));
    expect(refusal.code).toBe('size');
    expect(refusal.message).toContain('at most 65536 bytes, got 65537');
  });
});

describe('longer ways to write the same value', () => {
  test.each([
    ['0 as uint 8', 'cc 00', 0],
    ['127 as uint 16', 'cd 007f', 127],
    ['255 as uint 16', 'cd 00ff', 255],
    ['65535 as uint 32', 'ce 0000ffff', 65_535],
    ['1 as uint 64', 'cf 0000000000000001', 1],
    ['5 as int 8', 'd0 05', 5],
    ['-1 as int 8', 'd0 ff', -1],
    ['-1 as int 64', 'd3 ffffffffffffffff', -1],
    ['200 as int 16', 'd1 00c8', 200],
    ['1 as float 64', 'cb 3ff0000000000000', 1],
    ['1 as float 32', 'ca 3f800000', 1],
    ['1.5 as float 64', 'cb 3ff8000000000000', 1.5],
    ['"a" as str 8', 'd901 61', 'a'],
    ['"a" as str 32', 'db00000001 61', 'a'],
    ['one byte as bin 16', 'c50001 07', Uint8Array.of(7)],
    ['an empty array as array 16', 'dc0000', []],
    ['an empty map as map 16', 'de0000', {}],
    ['keys out of order', '82 a162 01 a161 02', { a: 2, b: 1 }],
  ])('%s: refused as ours, read from others', (_, text, value) => {
    expect(refusalOf(() => decode(bytes(text))).message).toContain('expected');
    expect(decode(bytes(text), {}, 'any')).toStrictEqual(value);
  });

  test('what the MessagePack library itself writes by default is read from others', () => {
    const value = { id: 7, value: 21.375, flags: [true, null], name: 'außen', raw: Uint8Array.of(1, 2, 3) };
    const written = new Packr({ useRecords: false }).pack(value);
    expect(() => decode(written)).toThrow(/shortest form/);
    expect(decode(written, {}, 'any')).toStrictEqual(value);
  });
});

describe('writing', () => {
  test.each([
    ['NaN', { a: [0, Number.NaN] }, 'a[1]: expected a finite number, got NaN'],
    ['infinity', [Number.POSITIVE_INFINITY], '[0]: expected a finite number, got Infinity'],
    ['undefined', { limits: { high: undefined } }, 'limits.high: expected plain data, got undefined'],
    ['a date', { 'made at': new Date(0) }, '["made at"]: expected plain data, got Date'],
    ['floats in a typed array', { x: new Float64Array(2) }, 'x: expected plain data, got Float64Array'],
    ['a map object', new Map(), 'the value: expected plain data, got Map'],
    ['a bigint', { n: 5n }, 'n: expected plain data, got bigint'],
    ['half a surrogate pair', { t: '\ud800' }, 't: expected well-formed text'],
  ])('%s is refused with its path', (_, value, message) => {
    const refusal = refusalOf(() => encode(value));
    expect(refusal.code).toBe('encode');
    expect(refusal.message).toContain(message);
  });

  test.each([
    ['an array of bytes', (bytes: Uint8Array) => bytes],
    ['a Buffer', (bytes: Uint8Array) => Buffer.from(bytes)],
  ])('bytes out of %s come back as copies of their own', (_, from) => {
    const source = from(encode({ raw: Uint8Array.of(1, 2, 3) }));
    const { raw } = decode(source) as { raw: Uint8Array };
    expect(Object.getPrototypeOf(raw)).toBe(Uint8Array.prototype);
    expect(raw.buffer.byteLength).toBe(3);
    expect(Object.keys(source).length).toBe(source.length);
    source.fill(0);
    expect([...raw]).toEqual([1, 2, 3]);
  });
});
