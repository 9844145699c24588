/**
 * Writes down what was learned, calibrated and judged as a bundle document.
 */
import { createHash } from 'node:crypto';
import {
  ARITHMETIC,
  BUNDLE_FORMAT,
  type Bundle,
  type BundleChannel,
  bundleDigest,
  encodeBundle,
  type JudgeTable,
  ProtocolError,
  quantiseTensor,
  type ResponseTensors,
  schemaHash,
} from '@stillwell/protocol';
import { modelFromBundle, runProbe } from '@stillwell/runtime/filter';
import { excludedFacts } from './exclusions.ts';
import type { FitInput, FitOptions } from './fit-options.ts';
import type { Series } from './history/series.ts';
import type { Verdicts } from './judge/gate.ts';
import type { Hindcast } from './judge/hindcast.ts';
import { skillScore } from './judge/scores.ts';
import type { KindSections } from './kinds/candidate.ts';
import { type Calibration, GUARD_RULES, type Surroundings } from './quantise/float-model.ts';

/** Everything a document is made of. */
export interface Composition {
  readonly input: FitInput;
  readonly options: FitOptions;
  readonly around: Surroundings;
  /** Of the model's kind. */
  readonly sections: KindSections;
  readonly calibration: Calibration;
  /** What plans of inputs bring; absent: nothing. */
  readonly response?: ResponseTensors | undefined;
  readonly judge: JudgeTable;
  /** Tick after the last one learned from. */
  readonly learnedToTick: number;
  /** What was settled on, for the provenance. */
  readonly settled: Readonly<Record<string, unknown>>;
}

/** Version of the trainer, as bundles name it. */
export const TRAINER_VERSION = '0.1.0';
/** The probe passes the generator's gap, which lies at ticks 48 to 63. */
const PROBE_TICKS = 96;
/** A candidate may be this much worse in squared error before its trial ends it. */
const WORSE_RATIO = 1.05;
/** Trial and probation watch this many horizons. */
const GATE_HORIZONS = 4;
/** Characters of a verdict beside the signal's name, at most. */
const LONGEST_VERDICT = 140;
const EMPTY_DIGEST = new Uint8Array(32);

/**
 * Composes the bundle, its probe included.
 *
 * shapes  as Bundle
 * units   as Bundle
 * throws  FilterError 'model' if the composed model cannot be computed with
 * source  none
 * cost    one probe
 */
export function composeBundle(parts: Composition): Bundle {
  const draft = bundleWithoutProbe(parts);
  const { outputs, last } = runProbe(modelFromBundle(draft), parts.options.seed, PROBE_TICKS);
  const digest = new Uint8Array(createHash('sha256').update(outputs).digest());
  return { ...draft, probe: { seed: parts.options.seed, ticks: PROBE_TICKS, digest, last } };
}

/**
 * Length of the document that these parts will give, without computing the probe.
 *
 * shapes  as `composeBundle`
 * units   bytes
 * throws  ProtocolError if the parts contradict each other
 * source  none
 * cost    one encoding
 */
export function documentBytes(parts: Composition): number {
  try {
    return encodeBundle(bundleWithoutProbe(parts)).length;
  } catch (error) {
    // Too long for any limit is a length too: whoever asks says what to do about it.
    if (error instanceof ProtocolError && error.code === 'size') return error.details.bytes as number;
    throw error;
  }
}

function bundleWithoutProbe(parts: Composition): Bundle {
  const { input, around, sections, calibration } = parts;
  const { site, series } = input;
  const { season, horizon, signalCount } = around;
  const gateTicks = GATE_HORIZONS * horizon;
  return {
    format: BUNDLE_FORMAT,
    arithmetic: ARITHMETIC,
    site: site.site,
    equipmentClass: site.equipmentClass,
    schema: schemaHash(site),
    madeAtMs: parts.learnedToTick * series.tickMs,
    tickMs: series.tickMs,
    horizon,
    channels: channelsOf(parts),
    ...sections,
    ...(parts.response === undefined ? {} : { response: parts.response }),
    ...agreementOf(around, input.site.signals.length + input.site.inputs.length),
    seasonal: {
      periodTicks: season.periodTicks,
      table: quantiseTensor(season.means, signalCount, season.bins, 'i8'),
    },
    bounds: {
      coverage: around.coverage,
      radius: quantiseTensor(calibration.radius, signalCount, horizon, 'i16'),
      rate: around.boundsRate,
      ...(calibration.boundsLongRate === undefined ? {} : { longRate: calibration.boundsLongRate }),
      ...(calibration.crossingMap === undefined ? {} : { crossing: Array.from(calibration.crossingMap) }),
      ...(calibration.crossingMaps === undefined || calibration.crossingMaps.every((map) => map === null)
        ? {}
        : {
            crossingBySignal: calibration.crossingMaps.map(
              (own) =>
                own && {
                  low: Math.round(10 * own.low),
                  high: Math.round(10 * own.high),
                  percent: Array.from(own.map, (share) => Math.round(100 * share)),
                },
            ),
          }),
      ...(calibration.crossingFresh === undefined ? {} : { crossingFresh: calibration.crossingFresh }),
    },
    guard: guardOf(calibration),
    warmupTicks: around.warmupTicks,
    gates: { worseRatio: WORSE_RATIO, trialTicks: gateTicks, probationTicks: gateTicks },
    provenance: provenanceOf(parts, series),
    judge: parts.judge,
    // Float64 take nine bytes each whatever they are, but whole numbers less.
    probe: { seed: parts.options.seed, ticks: PROBE_TICKS, digest: EMPTY_DIGEST, last: new Array(horizon).fill(0.1) },
  };
}

function agreementOf({ agreement, signalCount }: Surroundings, channelCount: number): Pick<Bundle, 'agreement'> {
  if (agreement === null) return {};
  const { weights, offset, scale, limit } = agreement;
  return {
    agreement: {
      weights: quantiseTensor(weights, signalCount, channelCount, 'i16'),
      offset: Array.from(offset),
      scale: Array.from(scale),
      limit: Array.from(limit),
    },
  };
}

function guardOf({ rejectSd, rejectMaxTicks, stuck }: Calibration): Bundle['guard'] {
  return {
    rejectSd,
    maxTicks: rejectMaxTicks,
    ...GUARD_RULES,
    ...(stuck === undefined
      ? {}
      : {
          stuck: Array.from(stuck.ticks),
          rests: stuck.rests.map((values) => Array.from(values)),
          ...(stuck.acts ? { stuckActs: true as const } : {}),
        }),
  };
}

function channelsOf({ input, around, calibration }: Composition): BundleChannel[] {
  return [...input.site.signals, ...input.site.inputs].map((signal, c) => {
    const { mean, scale, clipLow, clipHigh } = around.scalings[c];
    const { step, offset } = around.lattices[c];
    return {
      name: signal.name,
      role: c < around.signalCount ? 'signal' : 'input',
      unit: signal.unit,
      aggregate: signal.aggregate,
      lattice: { step, offset },
      clip: [clipLow, clipHigh],
      mean,
      scale,
      limits: signal.limits,
      residualScale: calibration.residualScale[c],
    };
  });
}

function provenanceOf(parts: Composition, series: Series): Bundle['provenance'] {
  const { input, options, settled } = parts;
  const { learnShare, calibrateShare, maxBytes, coverage, useAll } = options;
  return {
    historyDigest: series.digest,
    surveyDigest: new Uint8Array(createHash('sha256').update(JSON.stringify(input.survey)).digest()),
    firstMs: series.firstTick * series.tickMs,
    lastMs: (parts.learnedToTick - 1) * series.tickMs,
    ticks: series.ticks,
    previous: input.previous ? bundleDigest(input.previous) : null,
    seed: options.seed,
    options: JSON.stringify({
      learnShare,
      calibrateShare,
      maxBytes,
      coverage,
      useAll,
      ...settled,
      ...excludedFacts(series),
    }),
    versions: { trainer: TRAINER_VERSION },
  };
}

/**
 * The judge's numbers as the bundle holds them. A cell without one judged reading holds 0; its sentence says so.
 *
 * shapes  as JudgeTable
 * units   standardised²; shares
 * throws  nothing
 * source  none
 * cost    trivial
 */
export function judgeTable(hindcast: Hindcast, verdicts: Verdicts, override: string | null): JudgeTable {
  const ny = hindcast.signals.length;
  const { horizon: H, rivals } = hindcast;
  const { horizons } = verdicts;
  const pick = (rows: number, cellOf: (row: number, h: number) => number): Float64Array =>
    Float64Array.from({ length: rows * horizons.length }, (_, k) => {
      const value = cellOf(Math.floor(k / horizons.length), horizons[k % horizons.length]);
      return Number.isFinite(value) ? value : 0;
    });
  const table = (rows: number, cellOf: (row: number, h: number) => number): JudgeTable['mse'] =>
    quantiseTensor(pick(rows, cellOf), rows, horizons.length, 'f32');
  return {
    horizons,
    rivals,
    mse: table(ny, (i, h) => hindcast.mseStandardised[i * H + h - 1]),
    skill: table(ny * rivals.length, (row, h) => {
      const cell = Math.floor(row / rivals.length) * H + h - 1;
      return skillScore(hindcast.mse[cell], hindcast.rivalMse[(row % rivals.length) * ny * H + cell]);
    }),
    coverage: table(ny, (i, h) => hindcast.coverage[i * H + h - 1]),
    verdicts: verdicts.signals.map((verdict) => verdict.sentence),
    hasSkill: verdicts.hasSkill,
    override,
  };
}

/** A table of the size the real one will have, so that bytes are known before anything is judged. */
export function placeholderJudge(
  names: readonly string[],
  horizons: readonly number[],
  rivals: number,
  override: string | null,
): JudgeTable {
  const zeros = (rows: number): JudgeTable['mse'] =>
    quantiseTensor(new Float64Array(rows * horizons.length), rows, horizons.length, 'f32');
  return {
    horizons,
    rivals: new Array(rivals).fill('x'.repeat(20)),
    mse: zeros(names.length),
    skill: zeros(names.length * rivals),
    coverage: zeros(names.length),
    verdicts: names.map((name) => name + 'x'.repeat(LONGEST_VERDICT)),
    hasSkill: true,
    override,
  };
}
