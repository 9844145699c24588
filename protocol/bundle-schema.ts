/**
 * Every field of the bundle document, each with what it may hold by itself; bundle-check.ts holds them against each other.
 */
import { z } from 'zod';
import { binary } from './binary.ts';
import { BUNDLE_KINDS, type Bundle, CROSSING_KNOTS } from './bundle.ts';
import { type ChannelColumns, channelColumnsSchema } from './channel-columns.ts';
import { MAX_HORIZON, MAX_LAG_TICKS, MAX_TICK_MS, MIN_TICK_MS } from './limits.ts';
import { isName, NAME_RULE } from './name.ts';

const bytes = binary();
const digest = binary(32);
const name = z.string().refine(isName, `expected ${NAME_RULE}`);
const positive = z.number().positive();
const time = z.int().min(-8.64e15).max(8.64e15);
const seed = z
  .int()
  .min(0)
  .max(2 ** 32 - 1);
const count = z.int().min(0);
const share = z.number().gt(0).lt(1);

/** A matrix as it stands in a document; lengths are checked where the shape is known. */
export const tensorSchema = z.strictObject({
  type: z.enum(['i8', 'i16', 'f32', 'f64']),
  rows: count,
  cols: count,
  scales: bytes,
  data: bytes,
});

/** Tensors and numbers of the linear kind. */
export const linearSchema = z.strictObject({
  decays: z.array(share).max(64),
  resonators: z.array(z.tuple([z.number(), z.number()])).max(64),
  lags: z.array(z.int().min(1).max(MAX_LAG_TICKS)).max(64),
  level: z.literal(true).optional(),
  featureExponents: tensorSchema,
  bottleneck: tensorSchema,
  readout: tensorSchema,
  own: tensorSchema.optional(),
  horizonBasis: tensorSchema,
});

/** Where long gaps fade to. */
export const seasonalSchema = z.strictObject({ periodTicks: count, table: tensorSchema });

/** Half-widths of the bounds. */
export const boundsSchema = z.strictObject({
  coverage: share,
  radius: tensorSchema,
  rate: share,
  longRate: z.number().positive().max(100).optional(),
  crossing: z.array(z.number().min(0).max(1)).length(CROSSING_KNOTS.length).optional(),
  crossingFresh: z.number().positive().max(1).optional(),
});

/** When a reading is passed over. */
export const guardSchema = z.strictObject({ rejectSd: positive, maxTicks: count });

/** Gates of trial and probation. */
export const gatesSchema = z.strictObject({ worseRatio: positive, trialTicks: count, probationTicks: count });

/** What it was learned from. */
export const provenanceSchema = z.strictObject({
  historyDigest: digest,
  surveyDigest: digest,
  firstMs: time,
  lastMs: time,
  ticks: count,
  previous: digest.nullable(),
  seed,
  options: z.string().max(8192),
  versions: z.record(z.string().min(1).max(64), z.string().max(64)),
});

/** The judge's numbers. */
export const judgeSchema = z.strictObject({
  horizons: z.array(z.int().min(1).max(MAX_HORIZON)).max(64),
  rivals: z.array(z.string().min(1).max(64)).max(16),
  mse: tensorSchema,
  skill: tensorSchema,
  coverage: tensorSchema,
  verdicts: z.array(z.string().min(1).max(400)),
  hasSkill: z.boolean(),
  override: z.string().min(1).max(1000).nullable(),
});

/** The replay that proves the arithmetic. */
export const probeSchema = z.strictObject({
  seed,
  ticks: z.int().min(1).max(100_000),
  digest,
  last: z.array(z.number()).max(MAX_HORIZON),
});

/** A bundle as it stands in a document: channels by column. */
export type BundleDocument = Omit<Bundle, 'channels'> & { readonly channels: ChannelColumns };

/** The whole document. */
export const bundleSchema = z.strictObject({
  format: z.int(),
  arithmetic: z.int(),
  kind: z.enum(BUNDLE_KINDS),
  site: name,
  equipmentClass: name,
  schema: digest,
  madeAtMs: time,
  tickMs: z.int().min(MIN_TICK_MS).max(MAX_TICK_MS),
  horizon: z.int().min(1).max(MAX_HORIZON),
  channels: channelColumnsSchema,
  linear: linearSchema.optional(),
  seasonal: seasonalSchema,
  bounds: boundsSchema,
  guard: guardSchema,
  warmupTicks: count,
  gates: gatesSchema,
  provenance: provenanceSchema,
  judge: judgeSchema,
  probe: probeSchema,
}) satisfies z.ZodType<BundleDocument>;
