/**
 * The compact forecast message: every signal of a site in one MessagePack payload, float32 paths. Retained; for our own
 * parts and for machines that want all signals at once.
 */
import { z } from 'zod';
import { binary } from './binary.ts';
import { encode } from './codec.ts';
import { ProtocolError } from './errors.ts';
import { MAX_HORIZON, MAX_SIGNALS } from './limits.ts';
import { type MessageHead, nameSchema, qualitySchema, readPacked, sequenceSchema } from './message.ts';
import { ADVISORY, MESSAGE_FORMAT } from './version.ts';

const time = z.int().min(-8.64e15).max(8.64e15);

/** Every field of the compact message. */
export const forecastsSchema = z.strictObject({
  format: z.literal(MESSAGE_FORMAT),
  kind: z.literal('forecasts'),
  site: nameSchema,
  gateway: nameSchema,
  bundle: binary(32),
  sequence: sequenceSchema,
  issuedAtMs: time,
  validUntilMs: time,
  quality: qualitySchema.optional(),
  qualityReason: z.string().min(1).optional(),
  advisory: z.string().min(1),
  originMs: time,
  tickMs: z.int().min(1),
  horizon: z.int().min(1).max(MAX_HORIZON),
  coverage: z.number().gt(0).lt(1),
  signals: z.array(nameSchema).min(1).max(MAX_SIGNALS),
  path: binary(),
});

/** The compact message as it stands in MessagePack; `forecastPathOf` reads its paths. */
export type ForecastsMessage = z.output<typeof forecastsSchema>;

/** What the compact message is made of, beside the head; a bundle must serve. */
export interface ForecastsFacts extends MessageHead {
  readonly bundle: Uint8Array;
  readonly sequence: number;
  /** Label of the last tick folded in. */
  readonly originMs: number;
  readonly tickMs: number;
  readonly horizon: number;
  readonly coverage: number;
  readonly signals: readonly string[];
  /** (ny × H) each, row-major, in each signal's unit. */
  readonly median: ArrayLike<number>;
  readonly lower: ArrayLike<number>;
  readonly upper: ArrayLike<number>;
}

/** One signal's path, in its unit. */
export interface ForecastPath {
  /** (H) each. */
  readonly median: Float64Array;
  readonly lower: Float64Array;
  readonly upper: Float64Array;
}

const packPaths = (facts: ForecastsFacts): Uint8Array => {
  const { horizon, median, lower, upper } = facts;
  const count = facts.signals.length * horizon;
  const got = [median.length, lower.length, upper.length];
  if (got.some((length) => length !== count)) {
    const text = `forecasts message: expected three paths of ${facts.signals.length} × ${horizon} numbers, got ${got.join(', ')}`;
    throw new ProtocolError('encode', text);
  }
  const bytes = new Uint8Array(count * 12);
  const view = new DataView(bytes.buffer);
  let at = 0;
  for (let i = 0; i < facts.signals.length; i++) {
    for (const path of [median, lower, upper]) {
      for (let h = 0; h < horizon; h++, at += 4) {
        const value = Math.fround(path[i * horizon + h]!);
        if (!Number.isFinite(value)) {
          const text = `forecasts message: signal "${facts.signals[i]}", step ${h + 1}: expected a finite number within float32, got ${value}`;
          throw new ProtocolError('encode', text);
        }
        view.setFloat32(at, value, true);
      }
    }
  }
  return bytes;
};

/**
 * Payload of the compact message.
 *
 * shapes  median, lower, upper (ny × H), row-major; on the wire ny × 3 × H float32 little-endian
 * units   times ms since 1970; paths in each signal's unit
 * throws  ProtocolError 'encode' on lengths that disagree or a number that is not finite
 */
export const forecastsMessage = (facts: ForecastsFacts): Uint8Array => {
  const message: ForecastsMessage = {
    format: MESSAGE_FORMAT,
    kind: 'forecasts',
    site: facts.site,
    gateway: facts.gateway,
    bundle: facts.bundle,
    sequence: facts.sequence,
    issuedAtMs: facts.issuedAtMs,
    validUntilMs: facts.validUntilMs,
    ...(facts.quality === null ? {} : { quality: facts.quality }),
    ...(facts.qualityReason === null ? {} : { qualityReason: facts.qualityReason }),
    advisory: ADVISORY,
    originMs: facts.originMs,
    tickMs: facts.tickMs,
    horizon: facts.horizon,
    coverage: facts.coverage,
    signals: [...facts.signals],
    path: packPaths(facts),
  };
  return encode(message);
};

/** Reads the compact message; throws ProtocolError 'size', 'scan', 'decode', 'format' or 'schema'. */
export const parseForecastsMessage = (payload: Uint8Array): ForecastsMessage => {
  const message = readPacked(forecastsSchema, 'forecasts', payload);
  const expected = message.signals.length * message.horizon * 12;
  if (message.path.length !== expected) {
    const text = `forecasts message: path: expected ${expected} bytes for ${message.signals.length} signals × 3 × ${message.horizon} steps, got ${message.path.length}`;
    throw new ProtocolError('schema', text, { details: { path: 'path' } });
  }
  for (let i = 0; i < message.signals.length; i++) {
    const { median, lower, upper } = forecastPathOf(message, i);
    const at = median.findIndex((value, h) => !(Number.isFinite(value) && lower[h]! <= value && value <= upper[h]!));
    if (at >= 0) {
      const got = `${lower[at]}, ${median[at]}, ${upper[at]}`;
      const text = `forecasts message: signal "${message.signals[i]}", step ${at + 1}: expected finite lower <= median <= upper, got ${got}`;
      throw new ProtocolError('schema', text, { details: { path: 'path' } });
    }
  }
  return message;
};

/** The path of signal `index`, as new arrays of H float64. */
export const forecastPathOf = (message: ForecastsMessage, index: number): ForecastPath => {
  const { horizon, path } = message;
  const view = new DataView(path.buffer, path.byteOffset, path.byteLength);
  const read = (part: number): Float64Array =>
    Float64Array.from({ length: horizon }, (_, h) => view.getFloat32(((index * 3 + part) * horizon + h) * 4, true));
  return { median: read(0), lower: read(1), upper: read(2) };
};
