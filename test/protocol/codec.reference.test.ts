/**
 * MessagePack specification, msgpack/msgpack, spec.md, "Formats": the first byte of every format and the range each
 * holds, from the table of the overview and the diagrams of the families. The map of two entries is the example of the
 * specification site's front page (msgpack.org), from memory.
 */
import { expect, test } from 'vitest';
import { decode, encode } from '../../protocol/codec.ts';

const hex = (bytes: Uint8Array): string => Buffer.from(bytes).toString('hex');
const bytes = (text: string): Uint8Array => Uint8Array.from(Buffer.from(text.replace(/ /g, ''), 'hex'));

// [format of spec.md, value, bytes]
const table: readonly (readonly [string, unknown, string])[] = [
  ['positive fixint, least', 0, '00'],
  ['positive fixint, most', 127, '7f'],
  ['fixmap, empty', {}, '80'],
  ['fixarray, empty', [], '90'],
  ['fixstr, empty', '', 'a0'],
  ['nil', null, 'c0'],
  ['false', false, 'c2'],
  ['true', true, 'c3'],
  ['bin 8', Uint8Array.of(1, 2), 'c4 02 01 02'],
  ['float 32', 1.5, 'ca 3fc00000'],
  ['float 64', 0.1, 'cb 3fb999999999999a'],
  ['uint 8, least', 128, 'cc 80'],
  ['uint 8, most', 255, 'cc ff'],
  ['uint 16, least', 256, 'cd 0100'],
  ['uint 16, most', 65_535, 'cd ffff'],
  ['uint 32, least', 65_536, 'ce 00010000'],
  ['uint 32, most', 2 ** 32 - 1, 'ce ffffffff'],
  ['uint 64, least', 2 ** 32, 'cf 0000000100000000'],
  ['uint 64, most exact', Number.MAX_SAFE_INTEGER, 'cf 001fffffffffffff'],
  ['negative fixint, most', -1, 'ff'],
  ['negative fixint, least', -32, 'e0'],
  ['int 8, most', -33, 'd0 df'],
  ['int 8, least', -128, 'd0 80'],
  ['int 16, most', -129, 'd1 ff7f'],
  ['int 16, least', -32_768, 'd1 8000'],
  ['int 32, most', -32_769, 'd2 ffff7fff'],
  ['int 32, least', -(2 ** 31), 'd2 80000000'],
  ['int 64, most', -(2 ** 31) - 1, 'd3 ffffffff7fffffff'],
  ['int 64, least exact', Number.MIN_SAFE_INTEGER, 'd3 ffe0000000000001'],
  ['fixmap, msgpack.org example', { compact: true, schema: 0 }, '82 a7 636f6d70616374 c3 a6 736368656d61 00'],
];

test.each(table)('%s', (_, value, text) => {
  expect(hex(encode(value))).toBe(text.replace(/ /g, ''));
  expect(decode(bytes(text))).toStrictEqual(value);
});

// Lengths at which the next wider head begins; spec.md, families str, bin, array, map.
const lengths: readonly (readonly [string, unknown, string])[] = [
  ['fixstr, 31 bytes', 'a'.repeat(31), 'bf'],
  ['str 8, 32 bytes', 'a'.repeat(32), 'd920'],
  ['str 8, 255 bytes', 'a'.repeat(255), 'd9ff'],
  ['str 16, 256 bytes', 'a'.repeat(256), 'da0100'],
  ['bin 8, 255 bytes', new Uint8Array(255), 'c4ff'],
  ['bin 16, 256 bytes', new Uint8Array(256), 'c50100'],
  ['fixarray, 15', Array(15).fill(0), '9f'],
  ['array 16, 16', Array(16).fill(0), 'dc0010'],
  ['fixmap, 15', Object.fromEntries(Array.from({ length: 15 }, (_, i) => [`k${i}`, i])), '8f'],
  ['map 16, 16', Object.fromEntries(Array.from({ length: 16 }, (_, i) => [`k${i}`, i])), 'de0010'],
];

test.each(lengths)('%s', (_, value, head) => {
  const written = encode(value);
  expect(hex(written).startsWith(head)).toBe(true);
  expect(decode(written)).toStrictEqual(value);
});

test.each([
  ['str 32', 'a'.repeat(65_536), 'db00010000'],
  ['bin 32', new Uint8Array(65_536), 'c600010000'],
  ['array 32', Array(65_536).fill(0), 'dd00010000'],
])('%s, 65536', (_, value, head) => {
  const written = encode(value);
  expect(hex(written).startsWith(head)).toBe(true);
  const read = decode(written, { maxBytes: 100_000, maxItems: 100_000 }) as typeof value;
  expect(read.length).toBe(65_536);
  expect(Buffer.compare(encode(read), written)).toBe(0);
});

test.each([
  ['ext 8', 'c70100ff'],
  ['ext 16', 'c8000100ff'],
  ['ext 32', 'c90000000100ff'],
  ['fixext 1', 'd400ff'],
  ['fixext 2', 'd500ffff'],
  ['fixext 4, timestamp 32', 'd6ff00000000'],
  ['fixext 8, timestamp 64', 'd7ff0000000000000000'],
  ['fixext 16', `d800${'ff'.repeat(16)}`],
  ['never used', 'c1'],
])('%s is refused in either form', (_, text) => {
  expect(() => decode(bytes(text))).toThrow(/^MessagePack byte 0: /);
  expect(() => decode(bytes(text), {}, 'any')).toThrow(/^MessagePack byte 0: /);
});
