/**
 * Walks MessagePack bytes without building anything and refuses what our documents never hold, so that the decoder
 * behind it only ever sees harmless input. Not recursive: nesting costs an array entry, never stack.
 *
 * Two forms. 'own' is the one form our writer gives a value, so that accepted bytes re-encode to themselves: shortest
 * integers and lengths, floats in the shortest exact width, map keys strictly ascending by their UTF-8 bytes.
 * 'any' is for payloads that other makers' equipment sends: any legal width, any key order, keys still strings and unique.
 *
 * Refused in both: extension types, the unused byte 0xc1, nesting or item counts past the limits, lengths past the end,
 * keys that are no strings, repeated keys, keys that touch prototypes, NaN and infinities, integers past 2^53 - 1,
 * malformed UTF-8, bytes after the value.
 */
import { isUtf8 } from 'node:buffer';
import { ProtocolError } from './errors.ts';

/** Bounds of one scan; bytes, nesting, and values with keys counted. */
export interface ScanLimits {
  readonly maxBytes: number;
  readonly maxDepth: number;
  readonly maxItems: number;
}

/** 'own': the single form our writer produces. 'any': every legal MessagePack form of the same plain values. */
export type ScanForm = 'own' | 'any';

type Kind = 'plain' | 'number' | 'text' | 'bytes' | 'array' | 'map';

interface Token {
  readonly kind: Kind;
  /** Bytes of the head, after which text and bytes follow. */
  readonly head: number;
  /** Bytes of text or bytes; entries of an array or map. */
  readonly length: number;
}

/** Keys that reach an object's prototype in the host language. */
const FORBIDDEN_KEYS: ReadonlySet<string> = new Set(['__proto__', 'constructor', 'prototype']);

const refuse = (at: number, what: string): never => {
  throw new ProtocolError('scan', `MessagePack byte ${at}: ${what}`, { details: { offset: at } });
};

const need = (view: DataView, at: number, count: number): void => {
  if (at + count > view.byteLength) {
    refuse(at, `expected ${count} more bytes, got ${view.byteLength - at}: the data is cut short`);
  }
};

/** Smallest value that needs each unsigned width; below it a shorter form exists. */
const UNSIGNED_FLOOR: Readonly<Record<number, number>> = { 1: 0x80, 2: 0x100, 4: 0x10000, 8: 0x100000000 };
/** Largest negative value that needs each signed width. */
const SIGNED_CEILING: Readonly<Record<number, number>> = { 1: -0x21, 2: -0x81, 4: -0x8001, 8: -0x80000001 };

const readUnsigned = (view: DataView, at: number, width: number): number => {
  if (width === 1) return view.getUint8(at);
  if (width === 2) return view.getUint16(at);
  if (width === 4) return view.getUint32(at);
  return view.getUint32(at) * 2 ** 32 + view.getUint32(at + 4);
};

const readSigned = (view: DataView, at: number, width: number): number => {
  if (width === 1) return view.getInt8(at);
  if (width === 2) return view.getInt16(at);
  if (width === 4) return view.getInt32(at);
  return view.getInt32(at) * 2 ** 32 + view.getUint32(at + 4);
};

const integerToken = (view: DataView, at: number, width: number, signed: boolean, own: boolean): Token => {
  need(view, at + 1, width);
  const value = signed ? readSigned(view, at + 1, width) : readUnsigned(view, at + 1, width);
  if (!Number.isSafeInteger(value)) refuse(at, 'expected an integer within ±(2^53 - 1), got a larger one');
  const shortest = signed ? value <= SIGNED_CEILING[width]! : value >= UNSIGNED_FLOOR[width]!;
  if (own && !shortest) refuse(at, `expected ${value} in its shortest form, got ${width} bytes`);
  return { kind: 'number', head: 1 + width, length: 0 };
};

const floatToken = (view: DataView, at: number, width: number, own: boolean): Token => {
  need(view, at + 1, width);
  const value = width === 4 ? view.getFloat32(at + 1) : view.getFloat64(at + 1);
  if (!Number.isFinite(value)) refuse(at, `expected a finite number, got ${value}`);
  if (own && Number.isSafeInteger(value) && !Object.is(value, -0)) {
    refuse(at, `expected ${value} as an integer, got a float`);
  }
  if (own && width === 8 && Math.fround(value) === value) refuse(at, `expected ${value} as float 32, got float 64`);
  return { kind: 'number', head: 1 + width, length: 0 };
};

/** Smallest length that needs each width of length field. */
const LENGTH_FLOOR: Readonly<Record<string, readonly [number, number, number]>> = {
  text: [32, 0x100, 0x10000],
  bytes: [0, 0x100, 0x10000],
  array: [0, 16, 0x10000],
  map: [0, 16, 0x10000],
};

const sizedToken = (view: DataView, at: number, kind: Kind, width: 1 | 2 | 4, own: boolean): Token => {
  need(view, at + 1, width);
  const length = readUnsigned(view, at + 1, width);
  const floor = LENGTH_FLOOR[kind]![width === 1 ? 0 : width === 2 ? 1 : 2]!;
  if (own && length < floor) refuse(at, `expected length ${length} in its shortest form, got ${width} bytes`);
  return { kind, head: 1 + width, length };
};

const readToken = (view: DataView, at: number, own: boolean): Token => {
  const byte = view.getUint8(at);
  if (byte < 0x80 || byte >= 0xe0) return { kind: 'number', head: 1, length: 0 };
  if (byte < 0x90) return { kind: 'map', head: 1, length: byte & 0x0f };
  if (byte < 0xa0) return { kind: 'array', head: 1, length: byte & 0x0f };
  if (byte < 0xc0) return { kind: 'text', head: 1, length: byte & 0x1f };
  if (byte === 0xc0 || byte === 0xc2 || byte === 0xc3) return { kind: 'plain', head: 1, length: 0 };
  if (byte >= 0xc4 && byte <= 0xc6) return sizedToken(view, at, 'bytes', (1 << (byte - 0xc4)) as 1 | 2 | 4, own);
  if (byte === 0xca) return floatToken(view, at, 4, own);
  if (byte === 0xcb) return floatToken(view, at, 8, own);
  if (byte >= 0xcc && byte <= 0xcf) return integerToken(view, at, 1 << (byte - 0xcc), false, own);
  if (byte >= 0xd0 && byte <= 0xd3) return integerToken(view, at, 1 << (byte - 0xd0), true, own);
  if (byte >= 0xd9 && byte <= 0xdb) return sizedToken(view, at, 'text', (1 << (byte - 0xd9)) as 1 | 2 | 4, own);
  if (byte === 0xdc || byte === 0xdd) return sizedToken(view, at, 'array', byte === 0xdc ? 2 : 4, own);
  if (byte === 0xde || byte === 0xdf) return sizedToken(view, at, 'map', byte === 0xde ? 2 : 4, own);
  if (byte === 0xc1) return refuse(at, 'expected a value, got the unused byte 0xc1');
  return refuse(at, `expected plain data, got extension type byte 0x${byte.toString(16)}`);
};

/** One open array or map. */
interface Frame {
  readonly isMap: boolean;
  /** Values still to come; a map counts its keys, so an even number left means a key is next. */
  left: number;
  /** 'own' form: bytes of the last key. */
  lastKey: Uint8Array | null;
  /** 'any' form: keys seen. */
  readonly keys: Set<string> | null;
}

const compareBytes = (a: Uint8Array, b: Uint8Array): number => Buffer.compare(a, b);

const checkKey = (frame: Frame, key: Uint8Array, at: number): void => {
  const text = Buffer.from(key.buffer, key.byteOffset, key.byteLength).toString('utf8');
  if (FORBIDDEN_KEYS.has(text)) refuse(at, `the key "${text}" is not allowed`);
  if (frame.keys !== null) {
    if (frame.keys.has(text)) refuse(at, `the key ${JSON.stringify(text)} appears twice in one map`);
    frame.keys.add(text);
    return;
  }
  if (frame.lastKey !== null) {
    const order = compareBytes(frame.lastKey, key);
    if (order === 0) refuse(at, `the key ${JSON.stringify(text)} appears twice in one map`);
    if (order > 0) refuse(at, `expected keys in ascending order, got ${JSON.stringify(text)} late`);
  }
  frame.lastKey = key;
};

/**
 * Refuses bytes that are not exactly one harmless MessagePack value within the limits.
 *
 * shapes  any length
 * units   limits in bytes, levels of arrays and maps, values (keys counted)
 * throws  ProtocolError 'size' past maxBytes; 'scan' with the byte offset for everything else
 * source  MessagePack specification, "Formats" (msgpack/msgpack, spec.md); the narrowing is ours
 * cost    one pass, O(bytes); one small object a value
 */
export const scanMessagePack = (bytes: Uint8Array, limits: ScanLimits, form: ScanForm = 'own'): void => {
  if (bytes.length > limits.maxBytes) {
    throw new ProtocolError(
      'size',
      `MessagePack data: expected at most ${limits.maxBytes} bytes, got ${bytes.length}`,
      {
        details: { bytes: bytes.length, maxBytes: limits.maxBytes },
      },
    );
  }
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  const open: Frame[] = [];
  let at = 0;
  let items = 0;
  do {
    need(view, at, 1);
    if (++items > limits.maxItems) refuse(at, `expected at most ${limits.maxItems} values, got more`);
    const frame = open.at(-1);
    const isKey = frame?.isMap === true && frame.left % 2 === 0;
    const token = readToken(view, at, form === 'own');
    if (isKey && token.kind !== 'text') refuse(at, 'expected a string as map key, got another type');
    if (frame !== undefined) frame.left--;
    const start = at + token.head;
    if (token.kind === 'array' || token.kind === 'map') {
      const left = token.kind === 'map' ? token.length * 2 : token.length;
      if (open.length >= limits.maxDepth) refuse(at, `expected at most ${limits.maxDepth} levels, got more`);
      if (left > limits.maxItems)
        refuse(at, `expected at most ${limits.maxItems} values, got ${left} in one ${token.kind}`);
      const keys = token.kind === 'map' && form === 'any' ? new Set<string>() : null;
      open.push({ isMap: token.kind === 'map', left, lastKey: null, keys });
      at = start;
    } else {
      need(view, start, token.length);
      const content = bytes.subarray(start, start + token.length);
      if (token.kind === 'text' && !isUtf8(content)) refuse(at, 'expected text in UTF-8, got malformed bytes');
      if (isKey) checkKey(frame, content, at);
      at = start + token.length;
    }
    while (open.length > 0 && open.at(-1)!.left === 0) open.pop();
  } while (open.length > 0);
  if (at !== bytes.length) refuse(at, `expected the end, got ${bytes.length - at} further bytes`);
};
