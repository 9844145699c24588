/** A small bundle with plausible numbers from a fixed recurrence, for tests of what carries bundles. Not a fitted model. */
import { createHash } from 'node:crypto';
import {
  ARITHMETIC,
  BUNDLE_FORMAT,
  type Bundle,
  type BundleChannel,
  bundleSchemaHash,
  quantiseTensor,
  type Tensor,
  type TensorType,
} from '../../protocol/index.ts';

/** Integers 0 to 2^32 - 1 by a linear recurrence (Numerical Recipes, "quick and dirty" generators); the same every time. */
export const recurrence = (seed: number): (() => number) => {
  let word = seed >>> 0;
  return () => {
    word = (Math.imul(word, 1664525) + 1013904223) >>> 0;
    return word;
  };
};

const matrix = (next: () => number, rows: number, cols: number, type: TensorType, positive = false): Tensor => {
  const values = Float64Array.from({ length: rows * cols }, () => next() / 2 ** 31 - (positive ? 0 : 1));
  return quantiseTensor(values, rows, cols, type);
};

const exponents = (next: () => number, rows: number, cols: number): Tensor => {
  const scales = new Uint8Array(rows * 4);
  const view = new DataView(scales.buffer);
  for (let row = 0; row < rows; row++) view.setFloat32(row * 4, 1, true);
  const data = Uint8Array.from({ length: rows * cols }, () => next() % 4);
  return { type: 'i8', rows, cols, scales, data };
};

const channel = (name: string, role: 'signal' | 'input', next: () => number): BundleChannel => ({
  name,
  role,
  unit: role === 'signal' ? 'Cel' : '1',
  aggregate: role === 'signal' ? 'mean' : 'last',
  lattice: { step: 0.1, offset: 0 },
  clip: [-40.1, 95.3],
  mean: next() / 2 ** 28,
  scale: 1 + next() / 2 ** 32,
  limits: { highHigh: null, high: 80, low: 2.5, lowLow: null },
  residualScale: 0.1 + next() / 2 ** 33,
});

/** Shape of a sample. */
export interface SampleShape {
  readonly signals: number;
  readonly inputs: number;
  readonly horizon: number;
  readonly order: number;
  readonly basis: number;
}

const SMALL: SampleShape = { signals: 2, inputs: 1, horizon: 6, order: 4, basis: 3 };
const digestOf = (text: string): Uint8Array => Uint8Array.from(createHash('sha256').update(text).digest());

/** A whole bundle that agrees with itself. */
export const sampleBundle = (shape: Partial<SampleShape> = {}, seed = 1): Bundle => {
  const { signals, inputs, horizon, order, basis } = { ...SMALL, ...shape };
  const next = recurrence(seed);
  const channels = [
    ...Array.from({ length: signals }, (_, i) => channel(`signal-${i + 1}`, 'signal', next)),
    ...Array.from({ length: inputs }, (_, i) => channel(`input-${i + 1}`, 'input', next)),
  ];
  const decays = [0.5, 0.75, 0.9375];
  const resonators: [number, number][] = [[0.96, 0.25]];
  const lags = [1, 2, 5];
  const features = decays.length + 2 * resonators.length + lags.length;
  const horizons = [1, Math.ceil(horizon / 2), horizon];
  const rivals = ['persistence', 'seasonal persistence', 'drift', 'ridge'];
  const last = Array.from({ length: horizon }, (_, h) => 20 + h / 8);
  return {
    format: BUNDLE_FORMAT,
    arithmetic: ARITHMETIC,
    kind: 'linear',
    site: 'mill-lane',
    equipmentClass: 'wet-well',
    schema: bundleSchemaHash({ tickMs: 60_000, channels }),
    madeAtMs: Date.UTC(2026, 2, 1),
    tickMs: 60_000,
    horizon,
    channels,
    linear: {
      decays,
      resonators,
      lags,
      featureExponents: exponents(next, channels.length, features),
      bottleneck: matrix(next, order, channels.length * features, 'i8'),
      readout: matrix(next, signals * basis, order, 'i8'),
      horizonBasis: matrix(next, horizon, basis, 'i16'),
    },
    seasonal: { periodTicks: 1440, table: matrix(next, signals, 24, 'i8') },
    bounds: { coverage: 0.9, radius: matrix(next, signals, horizon, 'i16', true), rate: 0.02 },
    guard: { rejectSd: 12, maxTicks: 5 },
    warmupTicks: 60,
    gates: { worseRatio: 1.1, trialTicks: 1440, probationTicks: 2880 },
    provenance: {
      historyDigest: digestOf('history'),
      surveyDigest: digestOf('survey'),
      firstMs: Date.UTC(2025, 0, 1),
      lastMs: Date.UTC(2026, 1, 28),
      ticks: 600_000,
      previous: null,
      seed: 1,
      options: '{"coverage":0.9,"seed":1}',
      versions: { stillwell: '0.1.0', node: '20.20.2' },
    },
    judge: {
      horizons,
      rivals,
      mse: matrix(next, signals, horizons.length, 'f32', true),
      skill: matrix(next, signals * rivals.length, horizons.length, 'f32', true),
      coverage: matrix(next, signals, horizons.length, 'f32', true),
      verdicts: Array.from({ length: signals }, (_, i) => `signal-${i + 1}: 12 % below the best rival at every step.`),
      hasSkill: true,
      override: null,
    },
    probe: { seed: 7, ticks: 64, digest: digestOf('probe'), last },
  };
};

/** Bytes of every tensor of a bundle: what is model rather than description. */
export const tensorBytes = (value: unknown): number => {
  if (typeof value !== 'object' || value === null || value instanceof Uint8Array) return 0;
  if ('scales' in value && 'data' in value) return (value as Tensor).scales.length + (value as Tensor).data.length;
  return Object.values(value).reduce<number>((sum, inner) => sum + tensorBytes(inner), 0);
};
