/**
 * Channels on the wire: one column a field instead of one map a channel, so that field names stand once. Saves about
 * 100 bytes a channel, which a small bundle would rather spend on the model.
 */
import { z } from 'zod';
import type { BundleChannel } from './bundle.ts';
import { ProtocolError } from './errors.ts';
import { MAX_CHANNELS } from './limits.ts';
import { isName, NAME_RULE } from './name.ts';

const column = <T extends z.ZodType>(cell: T) => z.array(cell).min(1).max(MAX_CHANNELS);
const numbers = column(z.number());
const positives = column(z.number().positive());
const levels = column(z.number().nullable());

/** Every column; all have one cell a channel, signals first. */
export const channelColumnsSchema = z.strictObject({
  name: column(z.string().refine(isName, `expected ${NAME_RULE}`)),
  role: column(z.enum(['signal', 'input'])),
  unit: column(z.string().min(1).max(40)),
  aggregate: column(z.enum(['last', 'mean', 'min', 'max', 'sum', 'increment'])),
  step: positives,
  offset: numbers,
  clipLow: numbers,
  clipHigh: numbers,
  mean: numbers,
  scale: positives,
  highHigh: levels,
  high: levels,
  low: levels,
  lowLow: levels,
  residualScale: positives,
});

/** The columns as they stand in a document. */
export type ChannelColumns = z.output<typeof channelColumnsSchema>;

/** Channels to columns. */
export const toColumns = (channels: readonly BundleChannel[]): ChannelColumns => ({
  name: channels.map((channel) => channel.name),
  role: channels.map((channel) => channel.role),
  unit: channels.map((channel) => channel.unit),
  aggregate: channels.map((channel) => channel.aggregate),
  step: channels.map((channel) => channel.lattice.step),
  offset: channels.map((channel) => channel.lattice.offset),
  clipLow: channels.map((channel) => channel.clip[0]),
  clipHigh: channels.map((channel) => channel.clip[1]),
  mean: channels.map((channel) => channel.mean),
  scale: channels.map((channel) => channel.scale),
  highHigh: channels.map((channel) => channel.limits.highHigh),
  high: channels.map((channel) => channel.limits.high),
  low: channels.map((channel) => channel.limits.low),
  lowLow: channels.map((channel) => channel.limits.lowLow),
  residualScale: channels.map((channel) => channel.residualScale),
});

/**
 * Columns to channels.
 *
 * throws  ProtocolError 'schema' if the columns are not of one length
 */
export const fromColumns = (columns: ChannelColumns): readonly BundleChannel[] => {
  const count = columns.name.length;
  for (const [field, cells] of Object.entries(columns)) {
    if (cells.length === count) continue;
    const text = `bundle document: channels.${field}: expected ${count} entries, one a name, got ${cells.length}`;
    throw new ProtocolError('schema', text, { details: { path: `channels.${field}` } });
  }
  return columns.name.map((name, i) => ({
    name,
    role: columns.role[i]!,
    unit: columns.unit[i]!,
    aggregate: columns.aggregate[i]!,
    lattice: { step: columns.step[i]!, offset: columns.offset[i]! },
    clip: [columns.clipLow[i]!, columns.clipHigh[i]!],
    mean: columns.mean[i]!,
    scale: columns.scale[i]!,
    limits: {
      highHigh: columns.highHigh[i]!,
      high: columns.high[i]!,
      low: columns.low[i]!,
      lowLow: columns.lowLow[i]!,
    },
    residualScale: columns.residualScale[i]!,
  }));
};
