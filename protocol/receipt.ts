/**
 * The receipt: the desk's word that segments are in its store, so that the gateway may delete them. MessagePack. Names
 * each segment by number and content hash, since a number alone would confirm another content under the same number.
 */
import { z } from 'zod';
import { binary } from './binary.ts';
import { encode } from './codec.ts';
import { ProtocolError } from './errors.ts';
import { MAX_RECEIPT_SEGMENTS } from './limits.ts';
import { nameSchema, readPacked } from './message.ts';
import { MESSAGE_FORMAT } from './version.ts';

/** One confirmed segment. */
export const receiptSegmentSchema = z.strictObject({
  number: z
    .int()
    .min(0)
    .max(2 ** 32 - 1),
  hash: binary(32),
});

/** Every field of a receipt. */
export const receiptSchema = z.strictObject({
  format: z.literal(MESSAGE_FORMAT),
  kind: z.literal('receipt'),
  site: nameSchema,
  gateway: nameSchema,
  stream: binary(8),
  segments: z.array(receiptSegmentSchema).min(1).max(MAX_RECEIPT_SEGMENTS),
});

/** A receipt as it stands in MessagePack. */
export type ReceiptMessage = z.output<typeof receiptSchema>;

/** One confirmed segment: its number and the SHA-256 of all its bytes. */
export interface ReceiptSegment {
  readonly number: number;
  readonly hash: Uint8Array;
}

/** What a receipt is made of. */
export interface ReceiptFacts {
  readonly site: string;
  readonly gateway: string;
  /** Random id of the gateway's stream, 8 bytes. */
  readonly stream: Uint8Array;
  readonly segments: readonly ReceiptSegment[];
}

/**
 * Payload of a receipt for 1 to MAX_RECEIPT_SEGMENTS segments of one stream.
 *
 * shapes  stream 8 bytes, each hash 32
 * throws  ProtocolError 'encode' on no segments or too many; 'schema' on ids or hashes of another length
 */
export const receiptMessage = (facts: ReceiptFacts): Uint8Array => {
  const { site, gateway, stream, segments } = facts;
  if (segments.length < 1 || segments.length > MAX_RECEIPT_SEGMENTS) {
    const text = `receipt message: expected 1 to ${MAX_RECEIPT_SEGMENTS} segments, got ${segments.length}`;
    throw new ProtocolError('encode', text, { details: { segments: segments.length } });
  }
  const message: ReceiptMessage = {
    format: MESSAGE_FORMAT,
    kind: 'receipt',
    site,
    gateway,
    stream,
    segments: segments.map(({ number, hash }) => ({ number, hash })),
  };
  const payload = encode(message);
  parseReceiptMessage(payload);
  return payload;
};

/** Reads a receipt; throws ProtocolError 'size', 'scan', 'decode', 'format' or 'schema'. */
export const parseReceiptMessage = (payload: Uint8Array): ReceiptMessage =>
  readPacked(receiptSchema, 'receipt', payload);
