/**
 * The header of a NumPy array file: how numbers lie in it. The format is published with NumPy (numpy.lib.format, versions
 * 1.0, 2.0 and 3.0).
 *
 *     offset  size  meaning
 *     0       6     0x93 "NUMPY"
 *     6       2     version, major and minor
 *     8       2     length of what follows, little-endian (4 bytes from version 2.0 on)
 *     10/12         a Python dictionary with 'descr', 'fortran_order' and 'shape', padded with blanks, then a line feed
 */
import { refusal, shown } from '../history/refusal.ts';

/** How the numbers of a file lie. */
export interface NpyHeader {
  /** Bytes before the first number. */
  readonly dataAt: number;
  readonly type: NumberType;
  readonly shape: readonly number[];
}

/** A type of number that is read. */
export interface NumberType {
  readonly bytes: number;
  /** True where a number may be none, or infinite. */
  readonly isFloat: boolean;
  /** The numbers in a run of bytes, which begins at a multiple of `bytes`. */
  view(buffer: ArrayBuffer, count: number): ArrayLike<number | bigint>;
}

/** Bytes to read first: enough for every usual header. */
export const HEADER_READ = 65_548;

const TYPES: Readonly<Record<string, NumberType>> = {
  f4: { bytes: 4, isFloat: true, view: (buffer, count) => new Float32Array(buffer, 0, count) },
  f8: { bytes: 8, isFloat: true, view: (buffer, count) => new Float64Array(buffer, 0, count) },
  i1: { bytes: 1, isFloat: false, view: (buffer, count) => new Int8Array(buffer, 0, count) },
  u1: { bytes: 1, isFloat: false, view: (buffer, count) => new Uint8Array(buffer, 0, count) },
  b1: { bytes: 1, isFloat: false, view: (buffer, count) => new Uint8Array(buffer, 0, count) },
  i2: { bytes: 2, isFloat: false, view: (buffer, count) => new Int16Array(buffer, 0, count) },
  u2: { bytes: 2, isFloat: false, view: (buffer, count) => new Uint16Array(buffer, 0, count) },
  i4: { bytes: 4, isFloat: false, view: (buffer, count) => new Int32Array(buffer, 0, count) },
  u4: { bytes: 4, isFloat: false, view: (buffer, count) => new Uint32Array(buffer, 0, count) },
  i8: { bytes: 8, isFloat: false, view: (buffer, count) => new BigInt64Array(buffer, 0, count) },
  u8: { bytes: 8, isFloat: false, view: (buffer, count) => new BigUint64Array(buffer, 0, count) },
};
const MAGIC = Buffer.from([0x93, 0x4e, 0x55, 0x4d, 0x50, 0x59]);

/** Reads the header from the first bytes of a file; TrainError 'history' where they are none, or say what is not read. */
export function readNpyHeader(path: string, start: Buffer): NpyHeader {
  const refuse = (expected: string, got: string, remedy: string): Error =>
    refusal({ file: path }, expected, got, remedy);
  if (!start.subarray(0, 6).equals(MAGIC) || start.length < 10)
    throw refuse('a NumPy array (.npy)', 'other bytes', 'save it with numpy.save');
  const major = start[6];
  if (major < 1 || major > 3)
    throw refuse('version 1, 2 or 3 of the .npy format', `${major}.${start[7]}`, 'save it with numpy.save');
  const from = major === 1 ? 10 : 12;
  const length = major === 1 ? start.readUInt16LE(8) : start.length >= 12 ? start.readUInt32LE(8) : HEADER_READ;
  if (from + length > start.length)
    throw refuse(
      'a header of the length it says',
      `the end of the file, or more than ${HEADER_READ} bytes of it`,
      AGAIN,
    );
  const text = start.toString('latin1', from, from + length);
  const descr = /'descr'\s*:\s*'([^']*)'/.exec(text)?.[1];
  const order = /'fortran_order'\s*:\s*(True|False)/.exec(text)?.[1];
  const shape = /'shape'\s*:\s*\(([\d\s,L]*)\)/.exec(text)?.[1];
  if (descr === undefined || order === undefined || shape === undefined)
    throw refuse(
      "'descr', 'fortran_order' and 'shape' in the header",
      shown(text.trim()),
      'save one plain array of numbers',
    );
  const type = /^[<|=]?([fiub][1248])$/.exec(descr)?.[1];
  if (type === undefined || TYPES[type] === undefined || (descr.startsWith('|') && TYPES[type].bytes > 1))
    throw refuse('little-endian numbers (<f4, <f8, |u1, <i2, <u2 …)', shown(descr), "save array.astype('<f4')");
  if (order === 'True') throw refuse('rows first (C order)', 'columns first', 'save numpy.ascontiguousarray(array)');
  const sizes = shape.split(',').flatMap((size) => (size.trim() === '' ? [] : [Number.parseInt(size, 10)]));
  return { dataAt: from + length, type: TYPES[type], shape: sizes };
}

const AGAIN = 'fetch the file again';
