/**
 * The record before the first bundle. A segment made without one says itself what its readings are: the saved state that it
 * starts from names the site's channels, their lattices and the last value of each, which stands for the forecast. So a desk
 * needs neither site file nor bundle to recover them.
 *
 * Saved state: MessagePack, own form. Lattices belong to a segment: they change where one ends.
 */
import { z } from 'zod';
import { decode, encode } from './codec.ts';
import { sha256 } from './digest.ts';
import { ProtocolError } from './errors.ts';
import { MAX_CHANNELS, MAX_TICK_MS, MIN_TICK_MS } from './limits.ts';
import { isName } from './name.ts';
import { MAX_INDEX, MAX_STATE_BYTES } from './segment/limits.ts';
import type { Aggregate, Site } from './site.ts';

/** What one column of a record holds. */
export interface LayoutChannel {
  readonly name: string;
  readonly role: 'signal' | 'input';
  /** UCUM code. */
  readonly unit: string;
  readonly aggregate: Aggregate;
  readonly lattice: { readonly step: number; readonly offset: number };
}

/** What the columns of a record hold; a bundle says the same of its own. */
export interface Layout {
  readonly tickMs: number;
  /** Signals first. */
  readonly channels: readonly LayoutChannel[];
}

/** Where a record without a bundle stands between two ticks. */
export interface PlainState {
  readonly layout: Layout;
  /** Last tick; -1 before the first. */
  readonly tick: number;
  /** (nc) lattice index of each channel's last value, NaN where none was on the lattice yet. */
  readonly last: Float64Array;
}

const channelSchema = z.strictObject({
  name: z.string().refine(isName),
  role: z.enum(['signal', 'input']),
  unit: z.string().min(1).max(64),
  aggregate: z.enum(['last', 'mean', 'min', 'max', 'sum', 'increment']),
  lattice: z.strictObject({ step: z.number().positive(), offset: z.number() }),
});
const layoutSchema = z.strictObject({
  tickMs: z.int().min(MIN_TICK_MS).max(MAX_TICK_MS),
  channels: z.array(channelSchema).min(1).max(MAX_CHANNELS),
});
const stateSchema = z.strictObject({
  format: z.literal(1),
  kind: z.literal('record'),
  layout: layoutSchema,
  tick: z.int().min(-1),
  last: z.array(z.int().min(-MAX_INDEX).max(MAX_INDEX).nullable()),
});

/** Layout of a site whose readings lie on lattices of these steps, by channel. */
export const layoutOf = (site: Site, steps: readonly number[]): Layout => {
  const channels = [
    ...site.signals.map((signal) => ({ ...signal, role: 'signal' as const })),
    ...site.inputs.map((input) => ({ ...input, role: 'input' as const })),
  ];
  return {
    tickMs: site.tickMs,
    channels: channels.map(({ name, role, unit, aggregate }, c) => ({
      name,
      role,
      unit,
      aggregate,
      lattice: { step: steps[c]!, offset: 0 },
    })),
  };
};

/** A layout's bytes. */
export const encodeLayout = (layout: Layout): Uint8Array => encode(layout);

/** Its name: SHA-256; 32 bytes. */
export const layoutDigest = (layout: Layout): Uint8Array => sha256('stillwell layout v1\n', encodeLayout(layout));

/** throws  ProtocolError 'size', 'scan', 'decode' or 'segment' */
export const decodeLayout = (bytes: Uint8Array): Layout => checked(layoutSchema, bytes);

/** The state's bytes: equal states are equal bytes. */
export const encodePlainState = ({ layout, tick, last }: PlainState): Uint8Array =>
  encode({ format: 1, kind: 'record', layout, tick, last: Array.from(last, (k) => (Number.isNaN(k) ? null : k)) });

/** throws  ProtocolError 'size', 'scan', 'decode' or 'segment' where the bytes are no state of a record without a bundle */
export const decodePlainState = (bytes: Uint8Array): PlainState => {
  const { layout, tick, last } = checked(stateSchema, bytes);
  if (last.length !== layout.channels.length)
    throw new ProtocolError(
      'segment',
      `state of a record without a bundle: expected ${layout.channels.length} last values, got ${last.length}`,
    );
  return { layout, tick, last: Float64Array.from(last, (k) => k ?? Number.NaN) };
};

function checked<T>(schema: z.ZodType<T>, bytes: Uint8Array): T {
  const parsed = schema.safeParse(decode(bytes, { maxBytes: MAX_STATE_BYTES }));
  if (parsed.success) return parsed.data;
  const { path, message } = parsed.error.issues[0]!;
  throw new ProtocolError('segment', `state of a record without a bundle: ${path.join('.')}: ${message}`);
}
