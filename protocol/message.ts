/**
 * What every published message has in common: who speaks, by which bundle, how long it holds, how good it is, and the
 * advisory mark. JSON for what people and PLCs read; messages between our own parts are MessagePack with the same facts.
 */
import { z } from 'zod';
import { decode } from './codec.ts';
import { toHex } from './digest.ts';
import { ProtocolError } from './errors.ts';
import { formatInstant, parseInstant } from './instant.ts';
import { formatFault, listFaults, showValue } from './issue.ts';
import { MAX_MESSAGE_BYTES } from './limits.ts';
import { isName, NAME_RULE } from './name.ts';
import { formatPath } from './path.ts';
import { ADVISORY, MESSAGE_FORMAT } from './version.ts';

/**
 * Status letters in the sense of NAMUR NE 107: F failure (no model serves), C function check (warming up, catching up),
 * S out of specification (outside the trained range, a plan that proved wrong), M maintenance required (readings that stay
 * away, repeat themselves or drift, a disk that takes nothing, a clock that was set back).
 */
export type Quality = 'F' | 'C' | 'S' | 'M';

/** The facts every message of a gateway carries. */
export interface MessageHead {
  readonly site: string;
  readonly gateway: string;
  /** Digest of the serving bundle, 32 bytes; null when none serves. */
  readonly bundle: Uint8Array | null;
  /** Its sequence number; null when none serves. */
  readonly sequence: number | null;
  readonly issuedAtMs: number;
  /** After this moment the message must not be used. */
  readonly validUntilMs: number;
  /** null: good. */
  readonly quality: Quality | null;
  readonly qualityReason: string | null;
}

/** A name of a site, gateway or signal. */
export const nameSchema = z.string().refine(isName, `expected ${NAME_RULE}`);
/** A moment as text. */
export const instantSchema = z
  .string()
  .refine((text) => parseInstant(text) !== null, 'expected an ISO 8601 time with zone');
/** Letters of `Quality`. */
export const qualitySchema = z.enum(['F', 'C', 'S', 'M']);
/** Sequence number of a bundle. */
export const sequenceSchema = z.int().min(1);
/** 32 bytes of SHA-256 in lower-case hexadecimal. */
export const hexDigestSchema = z
  .string()
  .refine((text) => /^[0-9a-f]{64}$/.test(text), 'expected 64 hexadecimal digits');

/** Fields of the head as they stand in JSON, for a message of one kind. */
export const headFields = <K extends string>(kind: K) => ({
  format: z.literal(MESSAGE_FORMAT),
  kind: z.literal(kind),
  site: nameSchema,
  gateway: nameSchema,
  bundle: hexDigestSchema.nullable(),
  sequence: sequenceSchema.nullable(),
  issued_at: instantSchema,
  valid_until: instantSchema,
  quality: qualitySchema.optional(),
  quality_reason: z.string().min(1).optional(),
  advisory: z.string().min(1),
});

/** The head as it stands in JSON; quality and its reason are left out when good. */
export const writeHead = <K extends string>(kind: K, head: MessageHead) => ({
  format: MESSAGE_FORMAT,
  kind,
  site: head.site,
  gateway: head.gateway,
  bundle: head.bundle === null ? null : toHex(head.bundle),
  sequence: head.sequence,
  issued_at: formatInstant(head.issuedAtMs),
  valid_until: formatInstant(head.validUntilMs),
  ...(head.quality === null ? {} : { quality: head.quality }),
  ...(head.qualityReason === null ? {} : { quality_reason: head.qualityReason }),
  advisory: ADVISORY,
});

/**
 * JSON would write NaN and infinities as null without a word. Messages hold thousands of numbers and are written every
 * tick, so the path to one, innermost first, is gathered only on the way back from a bad one.
 *
 * returns  null when every number is finite
 */
const pathToBad = (value: unknown): (string | number)[] | null => {
  if (typeof value === 'number') return Number.isFinite(value) ? null : [];
  if (typeof value !== 'object' || value === null) return null;
  if (Array.isArray(value)) {
    for (let i = 0; i < value.length; i++) {
      const path = pathToBad(value[i]);
      if (path !== null) return [...path, i];
    }
    return null;
  }
  for (const key of Object.keys(value)) {
    const path = pathToBad((value as Record<string, unknown>)[key]);
    if (path !== null) return [...path, key];
  }
  return null;
};

const refuseBad = (message: object): void => {
  const path = pathToBad(message)?.reverse();
  if (path === undefined) return;
  const value = path.reduce<unknown>((inner, key) => (inner as Record<string | number, unknown>)[key], message);
  throw new ProtocolError('encode', `message: ${formatPath(path)}: expected a finite number, got ${value}`, {
    details: { path: formatPath(path) },
  });
};

const encoder = new TextEncoder();

/** A JSON message as payload bytes. */
export const writeJson = (message: object): Uint8Array => {
  refuseBad(message);
  return encoder.encode(JSON.stringify(message));
};

const fieldsOf = (schema: z.ZodObject) => (path: readonly PropertyKey[]) =>
  path.length === 0 ? Object.keys(schema.shape) : [];

/** Holds a decoded message against its schema; `format` and `kind` first, for the clearer refusal. */
export const checkMessage = <S extends z.ZodObject>(schema: S, kind: string, value: unknown): z.output<S> => {
  const fields = typeof value === 'object' && value !== null ? (value as Record<string, unknown>) : {};
  const expected: Record<string, unknown> = { format: MESSAGE_FORMAT, kind };
  for (const [field, wanted] of Object.entries(expected)) {
    if (fields[field] === wanted) continue;
    const got = showValue(fields[field]);
    throw new ProtocolError('format', `${kind} message: ${field}: expected ${showValue(wanted)}, got ${got}`, {
      details: { field, expected: wanted, got: fields[field] },
    });
  }
  const parsed = schema.safeParse(value);
  if (parsed.success) return parsed.data;
  const fault = listFaults(parsed.error, value, fieldsOf(schema))[0]!;
  throw new ProtocolError('schema', `${kind} message: ${formatFault(fault)}`, {
    details: { path: formatPath(fault.path) },
  });
};

const checkSize = (kind: string, payload: Uint8Array): void => {
  if (payload.length <= MAX_MESSAGE_BYTES) return;
  throw new ProtocolError(
    'size',
    `${kind} message: expected at most ${MAX_MESSAGE_BYTES} bytes, got ${payload.length}`,
    {
      details: { bytes: payload.length, maxBytes: MAX_MESSAGE_BYTES },
    },
  );
};

/** Reads a JSON message: size, UTF-8, JSON, then its schema. */
export const readJson = <S extends z.ZodObject>(schema: S, kind: string, payload: Uint8Array): z.output<S> => {
  checkSize(kind, payload);
  let value: unknown;
  try {
    value = JSON.parse(new TextDecoder('utf-8', { fatal: true }).decode(payload));
  } catch (cause) {
    throw new ProtocolError(
      'decode',
      `${kind} message: expected JSON text in UTF-8, got ${payload.length} other bytes`,
      {
        cause,
      },
    );
  }
  return checkMessage(schema, kind, value);
};

/** Reads a MessagePack message: size, scan, decoder, then its schema. */
export const readPacked = <S extends z.ZodObject>(schema: S, kind: string, payload: Uint8Array): z.output<S> => {
  checkSize(kind, payload);
  return checkMessage(schema, kind, decode(payload, { maxBytes: MAX_MESSAGE_BYTES }));
};
