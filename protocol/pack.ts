/**
 * Writes plain values as MessagePack, one form a value: shortest integers and lengths, floats in the shortest exact
 * width, map keys ascending by their UTF-8 bytes. The library's own writer is not used because it widens every map,
 * turns -0 into 0 and follows insertion order, so that equal documents would differ in bytes.
 * Not for class instances, dates, or typed arrays other than Uint8Array: those are refused with their path.
 */
import { ProtocolError } from './errors.ts';
import { formatPath } from './path.ts';

type Path = (string | number)[];

const LONE_SURROGATE = /\p{Surrogate}/u;

const refuse = (path: Path, got: string): never => {
  throw new ProtocolError('encode', `cannot write ${formatPath(path) || 'the value'}: ${got}`, {
    details: { path: formatPath(path) },
  });
};

class Sink {
  #bytes = new Uint8Array(1024);
  #view = new DataView(this.#bytes.buffer);
  #length = 0;

  /** Makes room for `count` bytes and returns where they start. */
  #claim(count: number): number {
    const start = this.#length;
    if (start + count > this.#bytes.length) {
      const grown = new Uint8Array(Math.max(this.#bytes.length * 2, start + count));
      grown.set(this.#bytes.subarray(0, start));
      this.#bytes = grown;
      this.#view = new DataView(grown.buffer);
    }
    this.#length = start + count;
    return start;
  }

  byte(value: number): void {
    const at = this.#claim(1);
    this.#view.setUint8(at, value);
  }

  /** Head byte, then an unsigned or two's complement number of 1, 2 or 4 bytes. */
  sized(head: number, width: 1 | 2 | 4, value: number): void {
    const at = this.#claim(1 + width);
    this.#view.setUint8(at, head);
    if (width === 1) this.#view.setUint8(at + 1, value);
    else if (width === 2) this.#view.setUint16(at + 1, value);
    else this.#view.setUint32(at + 1, value);
  }

  wide(head: number, value: number): void {
    const at = this.#claim(9);
    this.#view.setUint8(at, head);
    this.#view.setBigInt64(at + 1, BigInt(value));
  }

  float(value: number): void {
    const isNarrow = Math.fround(value) === value;
    const at = this.#claim(isNarrow ? 5 : 9);
    this.#view.setUint8(at, isNarrow ? 0xca : 0xcb);
    if (isNarrow) this.#view.setFloat32(at + 1, value);
    else this.#view.setFloat64(at + 1, value);
  }

  raw(content: Uint8Array): void {
    const at = this.#claim(content.length);
    this.#bytes.set(content, at);
  }

  take(): Uint8Array {
    return this.#bytes.slice(0, this.#length);
  }
}

const writeInteger = (sink: Sink, value: number): void => {
  if (value >= 0) {
    if (value < 0x80) sink.byte(value);
    else if (value < 0x100) sink.sized(0xcc, 1, value);
    else if (value < 0x10000) sink.sized(0xcd, 2, value);
    else if (value < 0x100000000) sink.sized(0xce, 4, value);
    else sink.wide(0xcf, value);
  } else if (value >= -0x20) sink.byte(value & 0xff);
  else if (value >= -0x80) sink.sized(0xd0, 1, value);
  else if (value >= -0x8000) sink.sized(0xd1, 2, value);
  else if (value >= -0x80000000) sink.sized(0xd2, 4, value);
  else sink.wide(0xd3, value);
};

const writeNumber = (sink: Sink, value: number, path: Path): void => {
  if (!Number.isFinite(value)) refuse(path, `expected a finite number, got ${value}`);
  if (Number.isSafeInteger(value) && !Object.is(value, -0)) writeInteger(sink, value);
  else sink.float(value);
};

/** The head bytes of a sized kind, by the width of the length; null where the kind has no such width. */
const writeLength = (sink: Sink, length: number, heads: readonly [number | null, number, number]): void => {
  if (heads[0] !== null && length < 0x100) sink.sized(heads[0], 1, length);
  else if (length < 0x10000) sink.sized(heads[1], 2, length);
  else sink.sized(heads[2], 4, length);
};

const writeText = (sink: Sink, text: string, path: Path): void => {
  if (LONE_SURROGATE.test(text)) refuse(path, 'expected well-formed text, got half a surrogate pair');
  const content = Buffer.from(text, 'utf8');
  if (content.length < 0x20) sink.byte(0xa0 | content.length);
  else writeLength(sink, content.length, [0xd9, 0xda, 0xdb]);
  sink.raw(content);
};

const isPlainMap = (value: object): value is Record<string, unknown> => {
  const prototype: unknown = Object.getPrototypeOf(value);
  return prototype === Object.prototype || prototype === null;
};

const writeMap = (sink: Sink, map: Record<string, unknown>, path: Path): void => {
  // Sorted by UTF-8 bytes, which is code point order; UTF-16 order differs beyond the basic plane.
  const keys = Object.keys(map).sort((a, b) => Buffer.compare(Buffer.from(a), Buffer.from(b)));
  if (keys.length < 16) sink.byte(0x80 | keys.length);
  else writeLength(sink, keys.length, [null, 0xde, 0xdf]);
  for (const key of keys) {
    const inner = [...path, key];
    writeText(sink, key, inner);
    writeValue(sink, map[key], inner);
  }
};

const writeValue = (sink: Sink, value: unknown, path: Path): void => {
  if (value === null) sink.byte(0xc0);
  else if (typeof value === 'boolean') sink.byte(value ? 0xc3 : 0xc2);
  else if (typeof value === 'number') writeNumber(sink, value, path);
  else if (typeof value === 'string') writeText(sink, value, path);
  else if (value instanceof Uint8Array) {
    writeLength(sink, value.length, [0xc4, 0xc5, 0xc6]);
    sink.raw(value);
  } else if (Array.isArray(value)) {
    if (value.length < 16) sink.byte(0x90 | value.length);
    else writeLength(sink, value.length, [null, 0xdc, 0xdd]);
    for (let i = 0; i < value.length; i++) writeValue(sink, value[i], [...path, i]);
  } else if (typeof value === 'object' && isPlainMap(value)) writeMap(sink, value, path);
  else refuse(path, `expected plain data, got ${typeof value === 'object' ? value.constructor.name : typeof value}`);
};

/**
 * Writes one plain value: null, booleans, finite numbers, text, Uint8Array, arrays, maps with string keys.
 *
 * throws  ProtocolError 'encode' with the path of the first value that has no MessagePack form here
 * source  MessagePack specification, "Serialization": the shortest form for integers; key order is ours
 */
export const packValue = (value: unknown): Uint8Array => {
  const sink = new Sink();
  writeValue(sink, value, []);
  return sink.take();
};
