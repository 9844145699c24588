/**
 * Synthetic bundles and models for tests: shapes as a real site's, weights drawn from a seed and small enough that the
 * forecasts are tame, tensors on the wire as a maker would write them. Not fitted to anything.
 */
import type { Bundle, BundleChannel, ResponseTensors, Tensor } from '@stillwell/protocol';
import { ARITHMETIC, BUNDLE_FORMAT } from '@stillwell/protocol';
import {
  type CommonModel,
  type FilterState,
  type LinearCore,
  type LinearModel,
  modelFromBundle,
} from '@stillwell/runtime/filter';

/** What may be chosen; everything has a default. */
export interface ModelChoice {
  readonly seed?: number;
  readonly site?: string;
  readonly equipmentClass?: string;
  readonly schema?: Uint8Array;
  readonly tickMs?: number;
  readonly signals?: readonly string[];
  readonly inputs?: readonly string[];
  readonly horizon?: number;
  readonly order?: number;
  readonly basis?: number;
  readonly decays?: readonly number[];
  readonly resonators?: readonly (readonly [number, number])[];
  readonly lags?: readonly number[];
  /** With the level as one more feature. */
  readonly level?: true;
  /** With an own part. */
  readonly own?: true;
  /** With a response to plans of all inputs. */
  readonly response?: true;
  readonly seasonalPeriod?: number;
  readonly seasonalBins?: number;
  readonly coverage?: number;
  readonly boundsRate?: number;
  readonly rejectSd?: number;
  readonly rejectMaxTicks?: number;
  readonly warmupTicks?: number;
}

/** Numbers in [0, 1) by xorshift32 (Marsaglia 2003); the same sequence for the same seed. */
export function seededNumbers(seed: number): () => number {
  let x = seed | 0 || 88172645;
  return () => {
    x ^= x << 13;
    x ^= x >>> 17;
    x ^= x << 5;
    return (x >>> 0) / 4294967296;
  };
}

const DEFAULT_DECAYS = [1.5, 3, 6, 12, 24, 48, 96, 192].map((tau) => Math.exp(-1 / tau));
const DEFAULT_RESONATORS = [24, 72].flatMap((tau) =>
  [1, 2, 3].map((m): [number, number] => {
    const size = Math.exp(-1 / tau);
    return [size * Math.cos((2 * Math.PI * m) / 24), size * Math.sin((2 * Math.PI * m) / 24)];
  }),
);

/** A bundle that every check of the filter accepts, and that matches `syntheticModel` of the same choice. */
export function syntheticBundle(choice: ModelChoice = {}): Bundle {
  const random = seededNumbers(choice.seed ?? 1);
  const signals = choice.signals ?? ['level', 'flow'];
  const inputs = choice.inputs ?? [];
  const horizon = choice.horizon ?? 24;
  const d = choice.order ?? 8;
  const r = choice.basis ?? 4;
  const decays = choice.decays ?? DEFAULT_DECAYS;
  const resonators = choice.resonators ?? DEFAULT_RESONATORS;
  const lags = choice.lags ?? [1, 2, 3, 23, 24, 25];
  const nc = signals.length + inputs.length;
  const ny = signals.length;
  const F = decays.length + 2 * resonators.length + (choice.level === true ? 1 : 0) + lags.length;
  const ownWidth = (1 + nc - ny) * F;
  const bins = choice.seasonalBins ?? 24;
  const integers = (count: number, size: number): number[] =>
    Array.from({ length: count }, () => Math.round((2 * random() - 1) * size));
  const rows = (count: number, scale: number): number[] => Array.from({ length: count }, () => scale);
  return {
    format: BUNDLE_FORMAT,
    arithmetic: ARITHMETIC,
    kind: 'linear',
    site: choice.site ?? 'test-site',
    equipmentClass: choice.equipmentClass ?? 'test',
    schema: choice.schema ?? new Uint8Array(32),
    madeAtMs: 1_700_000_000_000,
    tickMs: choice.tickMs ?? 60_000,
    horizon,
    channels: [...signals, ...inputs].map((name, c) => channel(name, c < ny ? 'signal' : 'input', c)),
    linear: {
      decays,
      resonators,
      lags,
      ...(choice.level === true ? { level: true as const } : {}),
      featureExponents: integerTensor('i8', nc, F, integers(nc * F, 2), rows(nc, 1)),
      bottleneck: integerTensor('i8', d, nc * F, integers(d * nc * F, 127), rows(d, 0.3 / 127 / Math.sqrt(nc * F))),
      readout: integerTensor('i8', ny * r, d, integers(ny * r * d, 127), rows(ny * r, 0.3 / 127 / Math.sqrt(d))),
      horizonBasis: integerTensor('i16', horizon, r, integers(horizon * r, 32767), rows(horizon, 1 / 32767)),
      ...(choice.own === true
        ? { own: integerTensor('i8', ny * r, ownWidth, integers(ny * r * ownWidth, 127), rows(ny * r, 1e-3 / 127)) }
        : {}),
    },
    ...(choice.response === true ? { response: syntheticResponse(ny, nc - ny, d, F, horizon, integers) } : {}),
    seasonal: {
      periodTicks: choice.seasonalPeriod ?? 24,
      table: integerTensor('i8', ny, bins, integers(ny * bins, 127), rows(ny, 0.5 / 127)),
    },
    bounds: {
      coverage: choice.coverage ?? 0.9,
      radius: integerTensor('i16', ny, horizon, radiusIntegers(ny, horizon), rows(ny, 1 / 32767)),
      rate: choice.boundsRate ?? 0.05,
    },
    guard: { rejectSd: choice.rejectSd ?? 10, maxTicks: choice.rejectMaxTicks ?? 3 },
    warmupTicks: choice.warmupTicks ?? 0,
    gates: { worseRatio: 1.02, trialTicks: 100, probationTicks: 100 },
    provenance: {
      historyDigest: new Uint8Array(32).fill(1),
      surveyDigest: new Uint8Array(32).fill(2),
      firstMs: 1_690_000_000_000,
      lastMs: 1_700_000_000_000,
      ticks: 100_000,
      previous: null,
      seed: choice.seed ?? 1,
      options: '{}',
      versions: { stillwell: '0.1.0' },
    },
    judge: {
      horizons: [1],
      rivals: ['persistence'],
      mse: floatTensor(
        ny,
        1,
        Array.from({ length: ny }, () => 0.1),
      ),
      skill: floatTensor(
        ny,
        1,
        Array.from({ length: ny }, () => 0.2),
      ),
      coverage: floatTensor(
        ny,
        1,
        Array.from({ length: ny }, () => 0.9),
      ),
      verdicts: signals.map((name) => `${name}: synthetic, not judged`),
      hasSkill: true,
      override: null,
    },
    probe: { seed: 1, ticks: 0, digest: new Uint8Array(32), last: [] },
  };
}

/** Three poles, two curves an input, looks at the first and the last step. */
function syntheticResponse(
  ny: number,
  nu: number,
  d: number,
  features: number,
  horizon: number,
  integers: (count: number, size: number) => number[],
): ResponseTensors {
  const rows = (count: number, scale: number): number[] => Array.from({ length: count }, () => scale);
  const looks = horizon > 1 ? [1, horizon] : [1];
  const width = d + ny * looks.length + features;
  return {
    inputs: Array.from({ length: nu }, (_, u) => u),
    decays: [0.5, 0.8, 0.95],
    delay: Array.from({ length: ny * nu }, (_, k) => k % Math.min(3, horizon)),
    gain: integerTensor('i16', ny, nu * 5, integers(ny * nu * 5, 32767), rows(ny, 0.5 / 32767)),
    looks,
    readout: integerTensor('i16', nu * 2, width, integers(nu * 2 * width, 32767), rows(nu * 2, 0.1 / 32767)),
    basis: integerTensor('i8', nu * 2, horizon, integers(nu * 2 * horizon, 127), rows(nu * 2, 1 / 127)),
    surprise: Array.from({ length: nu }, () => 0.5),
  };
}

/** The model of `syntheticBundle(choice)`. */
export function syntheticModel(choice: ModelChoice = {}): LinearModel {
  return modelFromBundle(syntheticBundle(choice)) as LinearModel;
}

/**
 * Readings that a plant of that model might give: a daily swing, a slow wander and noise, on the sensor's lattice.
 * `missing` is the share of readings left out at random.
 */
export function syntheticReadings(model: CommonModel, ticks: number, seed: number, missing = 0): Float64Array[] {
  const random = seededNumbers(seed);
  const wander = new Float64Array(model.channelCount);
  return Array.from({ length: ticks }, (_, n) =>
    Float64Array.from({ length: model.channelCount }, (_, c) => {
      wander[c] = 0.98 * wander[c] + 0.2 * (random() + random() - 1);
      const z = Math.sin((2 * Math.PI * n) / 24 + c) + wander[c] + 0.1 * (random() - 0.5);
      const step = model.latticeStep[c];
      const y = model.latticeOffset[c] + step * Math.round((model.mean[c] + model.scale[c] * z) / step);
      return random() < missing ? Number.NaN : y;
    }),
  );
}

function channel(name: string, role: 'signal' | 'input', c: number): BundleChannel {
  const mean = 10 + 3 * c;
  const scale = 1.5 + 0.5 * c;
  return {
    name,
    role,
    unit: 'm',
    aggregate: 'last',
    lattice: { step: 0.01, offset: 0 },
    clip: [mean - 6 * scale, mean + 6 * scale],
    mean,
    scale,
    limits: { highHigh: null, high: role === 'signal' ? mean + 3 * scale : null, low: null, lowLow: null },
    residualScale: 0.2,
  };
}

/** Half-widths that grow as √h from 0.15, in 1/32767. */
function radiusIntegers(ny: number, horizon: number): number[] {
  return Array.from({ length: ny * horizon }, (_, k) =>
    Math.min(32767, Math.round(32767 * 0.15 * Math.sqrt((k % horizon) + 1))),
  );
}

/** Integers and row scales as they lie on the wire. */
export function integerTensor(
  type: 'i8' | 'i16',
  rows: number,
  cols: number,
  values: readonly number[],
  scales: readonly number[],
): Tensor {
  const width = type === 'i8' ? 1 : 2;
  const data = new Uint8Array(rows * cols * width);
  const view = new DataView(data.buffer);
  for (let k = 0; k < rows * cols; k++) {
    if (type === 'i8') view.setInt8(k, values[k]);
    else view.setInt16(2 * k, values[k], true);
  }
  const scaleBytes = new Uint8Array(4 * rows);
  const scaleView = new DataView(scaleBytes.buffer);
  for (let k = 0; k < rows; k++) scaleView.setFloat32(4 * k, scales[k], true);
  return { type, rows, cols, scales: scaleBytes, data };
}

function floatTensor(rows: number, cols: number, values: readonly number[]): Tensor {
  const data = new Uint8Array(4 * rows * cols);
  const view = new DataView(data.buffer);
  for (let k = 0; k < rows * cols; k++) view.setFloat32(4 * k, values[k], true);
  return { type: 'f32', rows, cols, scales: new Uint8Array(0), data };
}

/** What the bank keeps and works out in a state of the linear kind. */
export function linearCore(state: FilterState): LinearCore {
  return state.core as LinearCore;
}
