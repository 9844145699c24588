/**
 * Every field of the bundle document, each with what it may hold by itself; bundle-check.ts holds them against each other.
 */
import { z } from 'zod';
import { binary } from './binary.ts';
import { BUNDLE_KINDS, type Bundle, CROSSING_KNOTS } from './bundle.ts';
import { type ChannelColumns, channelColumnsSchema } from './channel-columns.ts';
import { MAX_CHANNELS, MAX_HORIZON, MAX_LAG_TICKS, MAX_ROUND_TICKS, MAX_TICK_MS, MIN_TICK_MS } from './limits.ts';
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

/** Tensors and numbers of the dense kind. */
export const denseSchema = z.strictObject({
  pairs: count,
  poles: tensorSchema,
  drive: tensorSchema,
  level: z.literal(true).optional(),
  readout: tensorSchema,
  horizonBasis: tensorSchema,
  lags: z.array(z.int().min(1).max(MAX_LAG_TICKS)).max(64).optional(),
  lagged: tensorSchema.optional(),
});

/** Random features beside the linear kind. */
export const featuresSchema = z.strictObject({
  seed,
  count: z.int().min(1).max(16_384),
  states: count,
  channels: z.array(count).max(MAX_CHANNELS),
  lags: z.array(z.int().min(1).max(1024)).max(64),
  scale: z.array(z.number().min(0).max(1e6)).max(4096 + MAX_CHANNELS),
  projection: tensorSchema,
  offset: tensorSchema,
  readout: tensorSchema,
});

/** What the switched kind adds to the linear one. */
export const switchedSchema = z.strictObject({
  modes: z.int().min(2).max(64),
  discrete: z.array(count).max(MAX_CHANNELS),
  driven: z.array(count).max(MAX_CHANNELS),
  forecast: z.array(count).max(MAX_CHANNELS),
  share: tensorSchema,
  centre: tensorSchema,
  spread: tensorSchema,
  slope: tensorSchema,
  habit: z.number().min(0).lt(1),
  drift: tensorSchema,
  coupling: tensorSchema,
  pairs: z.array(z.tuple([count, count])).max(4096),
  landing: tensorSchema,
  hazard: tensorSchema,
  dwellTicks: z.int().min(1).max(1_000_000),
  decays: z.array(share).min(1).max(16),
  limit: tensorSchema,
  floodFrom: tensorSchema,
  stops: tensorSchema,
  featureScale: tensorSchema,
  outlook: tensorSchema,
  outlookBasis: tensorSchema,
  seasonTicks: count,
  season: tensorSchema,
  doubt: tensorSchema,
  doubtScale: tensorSchema,
  correction: z
    .strictObject({
      count: z.int().min(1).max(4096),
      readout: tensorSchema,
      basis: tensorSchema,
      limit: tensorSchema,
    })
    .optional(),
});

/** Tensors and numbers of the driven kind. */
export const drivenSchema = z.strictObject({
  seed,
  width: positive,
  members: z.int().min(1).max(64),
  hidden: z.int().min(0).max(64),
  features: z.int().min(1).max(4096),
  linear: tensorSchema,
  gain: tensorSchema,
  start: tensorSchema,
  sensor: z.array(z.tuple([z.number(), z.number()])).max(MAX_CHANNELS),
  fadeDecays: z.array(share).min(1).max(16),
  meanDecays: z.array(share).min(1).max(16),
  deviation: tensorSchema,
  inputs: tensorSchema,
  settleTicks: count,
});

/** What a plan of the inputs adds. */
export const responseSchema = z.strictObject({
  inputs: z.array(count).min(1).max(MAX_CHANNELS),
  decays: z.array(share).max(64),
  delay: z.array(count).max(65_536),
  gain: tensorSchema,
  looks: z.array(z.int().min(1).max(MAX_HORIZON)).max(64),
  readout: tensorSchema,
  basis: tensorSchema,
  surprise: z.array(z.number().min(0)).max(MAX_CHANNELS),
});

/** What a round ago is taken away. */
export const roundSchema = z.strictObject({
  ticks: z.int().min(1).max(MAX_ROUND_TICKS),
  weight: z.array(z.number().min(0).max(1)).min(1).max(MAX_CHANNELS),
});

/** What the channels say of each other. */
export const agreementSchema = z.strictObject({
  weights: tensorSchema,
  offset: z.array(z.number()).max(MAX_CHANNELS),
  scale: z.array(z.number().min(0)).max(MAX_CHANNELS),
  limit: z.array(z.number().min(0)).max(MAX_CHANNELS),
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
  crossingBySignal: z
    .array(
      z
        .strictObject({
          low: z.int().min(-1e6).max(1e6),
          high: z.int().min(-1e6).max(1e6),
          percent: z.array(z.int().min(0).max(100)).length(CROSSING_KNOTS.length),
        })
        .nullable(),
    )
    .max(MAX_CHANNELS)
    .optional(),
});

/** When a reading is passed over. */
export const guardSchema = z.strictObject({
  rejectSd: positive,
  maxTicks: count,
  confirmsJumps: z.literal(true).optional(),
  bridgesGaps: z.literal(true).optional(),
  stuck: z.array(z.int().min(0).max(65_535)).max(MAX_CHANNELS).optional(),
  rests: z.array(z.array(z.number()).max(64)).max(MAX_CHANNELS).optional(),
  stuckActs: z.literal(true).optional(),
});

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
  dense: denseSchema.optional(),
  features: featuresSchema.optional(),
  switched: switchedSchema.optional(),
  driven: drivenSchema.optional(),
  response: responseSchema.optional(),
  round: roundSchema.optional(),
  agreement: agreementSchema.optional(),
  seasonal: seasonalSchema,
  bounds: boundsSchema,
  guard: guardSchema,
  warmupTicks: count,
  gates: gatesSchema,
  provenance: provenanceSchema,
  judge: judgeSchema,
  probe: probeSchema,
}) satisfies z.ZodType<BundleDocument>;
