import { expect, test } from 'vitest';
import { crc32 } from '../../../runtime/filter/checksum.ts';

const bytes = new TextEncoder().encode('123456789');

test('the check value of CRC-32, as every catalogue of checksums gives it (from memory)', () => {
  expect(crc32(bytes)).toBe(0xcbf43926);
  expect(crc32(new Uint8Array(0))).toBe(0);
});

test('a stretch is summed as if it stood alone', () => {
  expect(crc32(Uint8Array.of(7, ...bytes, 9), 1, 10)).toBe(0xcbf43926);
});
