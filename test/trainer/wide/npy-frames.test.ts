/** NumPy array files as frames: what is read, and what is refused in one sentence. */
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, describe, expect, test } from 'vitest';
import { openNpyFrames } from '../../../trainer/wide/npy-frames.ts';
import { readFrames } from '../../support/read-frames.ts';

const folder = mkdtempSync(join(tmpdir(), 'npy-'));
afterAll(() => rmSync(folder, { recursive: true }));

/** A file as the published format has it: magic, version, length, dictionary padded to 64, numbers. */
function file(
  name: string,
  dictionary: string,
  data: Uint8Array,
  { major = 1, magic = '\u0093NUMPY' }: { major?: number; magic?: string } = {},
): string {
  const before = major === 1 ? 10 : 12;
  const header = `${dictionary.padEnd(64 * Math.ceil((before + dictionary.length + 1) / 64) - before - 1)}\n`;
  const start = Buffer.alloc(before);
  start.write(magic, 'latin1');
  start[6] = major;
  if (major === 1) start.writeUInt16LE(header.length, 8);
  else start.writeUInt32LE(header.length, 8);
  const path = join(folder, name);
  writeFileSync(path, Buffer.concat([start, Buffer.from(header, 'latin1'), data]));
  return path;
}

function emptyFile(name: string): string {
  const path = join(folder, name);
  writeFileSync(path, '');
  return path;
}

const dictionary = (descr: string, shape: string, order = 'False'): string =>
  `{'descr': '${descr}', 'fortran_order': ${order}, 'shape': (${shape}), }`;

const bytesOf = (array: Float32Array | Float64Array | Int16Array | Uint16Array | BigInt64Array): Uint8Array =>
  new Uint8Array(array.buffer);

describe('numbers of every usual type', () => {
  test.each([
    ['<f4', bytesOf(Float32Array.of(1.5, -2, 3, 4, 5, 6))],
    ['<f8', bytesOf(Float64Array.of(1.5, -2, 3, 4, 5, 6))],
  ])('%s', async (descr, data) => {
    const source = await openNpyFrames(file('a.npy', dictionary(descr, '3, 2'), data));
    expect(source).toMatchObject({ frameLength: 2, count: 3, startMs: null, tickMs: null });
    expect(await readFrames(source)).toEqual([
      [1.5, -2],
      [3, 4],
      [5, 6],
    ]);
    // As often as wanted.
    expect(await readFrames(source)).toHaveLength(3);
  });

  test.each([
    ['|u1', Uint8Array.of(0, 255, 7, 8)],
    ['<u2', bytesOf(Uint16Array.of(0, 255, 7, 8))],
    ['<i2', bytesOf(Int16Array.of(0, 255, 7, 8))],
    ['<i8', bytesOf(BigInt64Array.of(0n, 255n, 7n, 8n))],
  ])('%s, frames of two axes', async (descr, data) => {
    const source = await openNpyFrames(file('b.npy', dictionary(descr, '2, 1, 2'), data), { startMs: 5, tickMs: 40 });
    expect(source).toMatchObject({ frameLength: 2, count: 2, startMs: 5, tickMs: 40 });
    expect(await readFrames(source)).toEqual([
      [0, 255],
      [7, 8],
    ]);
  });

  test.each([1, 2, 3])('version %i of the format', async (major) => {
    const path = file('c.npy', dictionary('<f4', '2, 1'), bytesOf(Float32Array.of(8, 9)), { major });
    expect(await readFrames(await openNpyFrames(path))).toEqual([[8], [9]]);
  });
});

test('long recordings come in chunks, each of the same memory', async () => {
  const frames = 5;
  const length = 500_000;
  const data = Float32Array.from({ length: frames * length }, (_, k) => k % 1000);
  const source = await openNpyFrames(file('long.npy', dictionary('<f4', `${frames}, ${length}`), bytesOf(data)));
  const counts: number[] = [];
  let at = 0;
  for await (const { count, values } of source.chunks()) {
    counts.push(count);
    expect(values[0]).toBe(data[at]);
    expect(values[count * length - 1]).toBe(data[at + count * length - 1]);
    at += count * length;
  }
  expect(counts).toEqual([2, 2, 1]);
});

describe('what is refused', () => {
  const two = bytesOf(Float32Array.of(1, 2));
  const good = dictionary('<f4', '2, 1');
  test.each([
    ['another file', () => file('d', good, two, { magic: 'PNG' }), 'expected a NumPy array (.npy), got other bytes'],
    [
      'a later version',
      () => file('e', good, two, { major: 9 }),
      'expected version 1, 2 or 3 of the .npy format, got 9.0',
    ],
    ['big-endian numbers', () => file('f', dictionary('>f4', '2, 1'), two), `got ">f4"; save array.astype('<f4')`],
    ['complex numbers', () => file('g', dictionary('<c8', '1, 1'), two), 'expected little-endian numbers'],
    ['columns first', () => file('h', dictionary('<f4', '2, 1', 'True'), two), 'expected rows first (C order)'],
    ['one axis', () => file('i', dictionary('<f4', '2,'), two), 'expected frames along the first of two axes or more'],
    ['no frames', () => file('j', dictionary('<f4', '0, 4'), new Uint8Array()), 'an array of shape (0, 4)'],
    ['a file cut short', () => file('k', dictionary('<f4', '3, 1'), two), 'it was cut short: fetch it again'],
    ['a second array behind', () => file('l', dictionary('<f4', '1, 1'), two), 'save one array a file'],
    [
      'records',
      () => file('m', "{'descr': [('a', '<f4')], 'fortran_order': False, 'shape': (2,)}", two),
      "expected 'descr'",
    ],
    [
      'no file',
      () => join(folder, 'none.npy'),
      'none.npy: expected a recording of frames, got nothing: there is no such',
    ],
    ['a folder', () => folder, 'expected a recording of frames, got a folder; name the files in it'],
    ['an empty file', () => emptyFile('q.npy'), 'q.npy: expected a recording of frames, got an empty file; fetch it'],
  ])('%s', async (_, path, message) => {
    await expect(openNpyFrames(path())).rejects.toThrow(message);
  });

  test('what is no number, with its place', async () => {
    const path = file('n', dictionary('<f4', '3, 2'), bytesOf(Float32Array.of(1, 2, 3, Number.NaN, 5, 6)));
    await expect(readFrames(await openNpyFrames(path))).rejects.toThrow(
      'expected numbers alone, got NaN at number 1 of frame 1 (from 0)',
    );
    const large = file('o', dictionary('<f8', '1, 1'), bytesOf(Float64Array.of(1e300)));
    await expect(readFrames(await openNpyFrames(large))).rejects.toThrow('got Infinity at number 0 of frame 0');
  });

  test('a header that is longer than the file', async () => {
    const path = join(folder, 'p');
    writeFileSync(path, Buffer.from([0x93, 0x4e, 0x55, 0x4d, 0x50, 0x59, 1, 0, 0xff, 0x0f, 0x7b]));
    await expect(openNpyFrames(path)).rejects.toThrow('expected a header of the length it says');
  });
});
