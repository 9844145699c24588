/**
 * What factors are written in, whole or still open: little-endian, every part a multiple of eight bytes.
 *
 * | offset | size | meaning |
 * | --- | --- | --- |
 * | 0 | 8 | magic |
 * | 8 | 4 | version |
 * | 12 | 4 | n, bytes of the head, a multiple of 8 |
 * | 16 | 8 | m, float64 numbers of the body |
 * | 24 | 32 | SHA-256 over bytes 0..23 and 56 to the end |
 * | 56 | n | head: JSON, filled up with spaces |
 * | 56 + n | 8 m | body: float64 |
 */
import { createHash } from 'node:crypto';

const HEAD_AT = 56;

/** What tells one kind of envelope from others. */
export interface EnvelopeKind {
  /** Eight characters. */
  readonly magic: string;
  readonly version: number;
  /** What it holds, for messages: 'factors file'. */
  readonly noun: string;
}

/** What was in an envelope. */
export interface Opened {
  readonly head: string;
  readonly body: Float64Array;
}

/**
 * Puts a head and the parts of a body into an envelope.
 *
 * shapes  none
 * units   bytes
 * throws  nothing
 * source  file head
 * cost    the size of the body
 */
export function sealEnvelope(
  { magic, version }: EnvelopeKind,
  head: string,
  parts: readonly (Float64Array | Uint8Array)[],
): Uint8Array {
  const json = new TextEncoder().encode(head);
  const headBytes = 8 * Math.ceil(json.length / 8);
  const numbers = parts.reduce((sum, part) => sum + part.length, 0);
  const bytes = new Uint8Array(HEAD_AT + headBytes + 8 * numbers);
  const view = new DataView(bytes.buffer);
  bytes.set(new TextEncoder().encode(magic));
  view.setUint32(8, version, true);
  view.setUint32(12, headBytes, true);
  view.setBigUint64(16, BigInt(numbers), true);
  bytes.fill(0x20, HEAD_AT, HEAD_AT + headBytes);
  bytes.set(json, HEAD_AT);
  const out = new Float64Array(bytes.buffer, HEAD_AT + headBytes, numbers);
  let at = 0;
  for (const part of parts) {
    out.set(part, at);
    at += part.length;
  }
  bytes.set(digestOf(bytes), 24);
  return bytes;
}

/**
 * Takes them out again.
 *
 * shapes  none
 * units   bytes
 * throws  what `refuse` throws, told in words: not of the kind, of another version, cut short, or damaged
 * source  file head
 * cost    the size of the body
 */
export function openEnvelope(
  { magic, version, noun }: EnvelopeKind,
  bytes: Uint8Array,
  refuse: (what: string) => never,
): Opened {
  if (bytes.length === 0) return refuse(`empty, expected a ${noun}`);
  if (bytes.length < 8 || new TextDecoder().decode(bytes.subarray(0, 8)) !== magic) return refuse(`not a ${noun}`);
  if (bytes.length < HEAD_AT) return refuse(`cut short: ${bytes.length} bytes, expected at least ${HEAD_AT}`);
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  const found = view.getUint32(8, true);
  if (found !== version) return refuse(`a ${noun} of version ${found}, this program reads ${version}`);
  const headBytes = view.getUint32(12, true);
  const expected = HEAD_AT + headBytes + 8 * Number(view.getBigUint64(16, true));
  if (bytes.length < expected) return refuse(`cut short: ${bytes.length} bytes, expected ${expected}`);
  if (bytes.length > expected) return refuse(`${bytes.length - expected} bytes too many, expected ${expected}`);
  if (digestOf(bytes).compare(bytes.subarray(24, HEAD_AT)) !== 0) return refuse('damaged: its SHA-256 does not match');
  // Copied only where it does not lie on a multiple of eight in the memory it came in.
  const rest = bytes.subarray(HEAD_AT + headBytes);
  const { buffer, byteOffset, byteLength } = rest.byteOffset % 8 === 0 ? rest : Uint8Array.from(rest);
  const body = new Float64Array(buffer, byteOffset, byteLength / 8);
  return { head: new TextDecoder().decode(bytes.subarray(HEAD_AT, HEAD_AT + headBytes)), body };
}

function digestOf(bytes: Uint8Array): Buffer {
  return createHash('sha256').update(bytes.subarray(0, 24)).update(bytes.subarray(HEAD_AT)).digest();
}
