/** Files of an invented site of eight signals or as many as asked, for a gateway process to run on: site file, key, sealed bundle. */
import { createHash } from 'node:crypto';
import { writeFileSync } from 'node:fs';
import { join } from 'node:path';
import {
  ARITHMETIC,
  BUNDLE_FORMAT,
  type Bundle,
  createKeyPair,
  encodeBundle,
  formatKey,
  parseSite,
  publicHalf,
  quantiseTensor,
  schemaHash,
  sealBundle,
  type Tensor,
} from '@stillwell/protocol';
import { modelFromBundle, runProbe } from '@stillwell/runtime/filter';

export const SIGNALS = 8;
const ORDER = 32;
const BASIS = 16;
const HORIZON = 60;
const MEAN = 10;
const DECAYS = [1.5, 3, 6, 12, 24, 48, 96, 192].map((tau) => Math.exp(-1 / tau));
const RESONATORS = [24, 72, 168].flatMap((tau) =>
  [1, 2, 3, 4, 5, 6].map((m): [number, number] => {
    const size = Math.exp(-1 / tau);
    return [size * Math.cos((2 * Math.PI * m) / 24), size * Math.sin((2 * Math.PI * m) / 24)];
  }),
);

/** Where the files are. */
export interface ProcessSite {
  readonly site: string;
  readonly key: string;
  readonly bundle: string;
}

/** Writes the three files into a folder; `tick` as a site file says it, such as "1min" or "250ms". */
export function writeProcessSite(folder: string, tick: string, count = SIGNALS): ProcessSite {
  const files = { site: join(folder, 'site.yaml'), key: join(folder, 'author.pub'), bundle: join(folder, 'first.swb') };
  const signals = Array.from({ length: count }, (_, i) =>
    [
      `  - name: s${i}`,
      `    topic: plant/s${i}`,
      '    payload: { json: /v, time: /t }',
      '    unit: m',
      '    resolution: 0.01',
      '    aggregate: last',
      '    limits: { high: 14, low: 6 }',
    ].join('\n'),
  );
  const text = `site: bench-site\nclass: bench\ntime_zone: UTC\ntick: ${tick}\nhorizon: ${HORIZON}\nlateness: 0s\nsignals:\n${signals.join('\n')}\n`;
  const author = createKeyPair(new Uint8Array(32).fill(1));
  const site = parseSite(text, 'site.yaml');
  const draft = draftBundle(site.tickMs, schemaHash(site), count);
  const { outputs, last } = runProbe(modelFromBundle(draft), 1, 64);
  const digest = new Uint8Array(createHash('sha256').update(outputs).digest());
  const document = encodeBundle({ ...draft, probe: { seed: 1, ticks: 64, digest, last } });
  writeFileSync(files.site, text);
  writeFileSync(files.key, formatKey(publicHalf(author)));
  writeFileSync(files.bundle, sealBundle(document, { epoch: 1, sequence: 1 }, [author]));
  return files;
}

/** A reading of one signal at a moment: a slow swing with a little noise, in JSON with its time. */
export function readingOf(signal: number, timeMs: number): string {
  const noise = Math.abs(Math.imul(Math.floor(timeMs / 50) + 31 * signal, 2654435761) % 100) / 100;
  const value = MEAN + Math.sin(timeMs / 4e6 + signal) + 0.2 * noise;
  return JSON.stringify({ v: Number(value.toFixed(2)), t: timeMs });
}

function draftBundle(tickMs: number, schema: Uint8Array, count: number): Bundle {
  let x = 2024;
  const uniform = (): number => {
    x ^= x << 13;
    x ^= x >>> 17;
    x ^= x << 5;
    return (x | 0) / 2147483648;
  };
  const F = DECAYS.length + 2 * RESONATORS.length;
  // A bundle of many signals must be as small as any other.
  const [order, basis] = count > SIGNALS ? [12, 8] : [ORDER, BASIS];
  const drawn = (rows: number, cols: number, type: Tensor['type'], draw: () => number): Tensor =>
    quantiseTensor(Float64Array.from({ length: rows * cols }, draw), rows, cols, type);
  const ones = new Uint8Array(new Float32Array(count).fill(1).buffer);
  const table = (cols: number, value: number): Tensor => drawn(count, cols, 'f32', () => value);
  return {
    format: BUNDLE_FORMAT,
    arithmetic: ARITHMETIC,
    kind: 'linear',
    site: 'bench-site',
    equipmentClass: 'bench',
    schema,
    madeAtMs: 1_700_000_000_000,
    tickMs,
    horizon: HORIZON,
    channels: Array.from({ length: count }, (_, i) => ({
      name: `s${i}`,
      role: 'signal' as const,
      unit: 'm',
      aggregate: 'last' as const,
      lattice: { step: 0.01, offset: 0 },
      clip: [-10, 30] as const,
      mean: MEAN,
      scale: 2,
      limits: { highHigh: null, high: 14, low: 6, lowLow: null },
      residualScale: 0.1,
    })),
    linear: {
      decays: DECAYS,
      resonators: RESONATORS,
      lags: [],
      featureExponents: { type: 'i8', rows: count, cols: F, scales: ones, data: new Uint8Array(count * F) },
      bottleneck: drawn(order, count * F, 'i8', () => 0.02 * uniform()),
      readout: drawn(count * basis, order, 'i8', () => 0.05 * uniform()),
      horizonBasis: drawn(HORIZON, basis, 'i16', () => 0.3 * uniform()),
    },
    seasonal: { periodTicks: 1440, table: drawn(count, 24, 'i8', () => 0.3 * uniform()) },
    bounds: { coverage: 0.9, radius: drawn(count, HORIZON, 'i16', () => 0.3), rate: 0.02 },
    guard: { rejectSd: 10, maxTicks: 3 },
    warmupTicks: 0,
    gates: { worseRatio: 1.02, trialTicks: 100, probationTicks: 100 },
    provenance: {
      historyDigest: new Uint8Array(32),
      surveyDigest: new Uint8Array(32),
      firstMs: 1_690_000_000_000,
      lastMs: 1_700_000_000_000,
      ticks: 100_000,
      previous: null,
      seed: 1,
      options: '{}',
      versions: {},
    },
    judge: {
      horizons: [1],
      rivals: ['persistence'],
      mse: table(1, 0.1),
      skill: table(1, 0.1),
      coverage: table(1, 0.9),
      verdicts: Array.from({ length: count }, (_, i) => `s${i}: not judged, made for a bench`),
      hasSkill: true,
      override: null,
    },
    probe: { seed: 1, ticks: 0, digest: new Uint8Array(32), last: [] },
  };
}
