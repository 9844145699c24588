/** Suite `accuracy`: how good what is learned is, on the published split of a measured series, or beside a known optimum. */
import { existsSync } from 'node:fs';
import { join } from 'node:path';
import { parseSite, type Site } from '@stillwell/protocol';
import { FIT_DEFAULTS, type FitResult, fit as fitHistory, fitWindowRidge, loadHistory } from '@stillwell/trainer';
import { openRows } from './accuracy-open.ts';
import type { BenchOptions, Row } from './harness.ts';
import { isWanted, row } from './harness.ts';
import { knownPlant } from './known-plant.ts';

/** The published split keeps 12, 4 and 4 months of 30 days. */
const SPLIT_ROWS = 14_400;
const FIRST_MS = Date.UTC(2016, 6, 1);
const HOUR_MS = 3_600_000;
const COLUMNS = ['HUFL', 'HULL', 'MUFL', 'MULL', 'LUFL', 'LULL', 'OT'];
/** Head of an envelope and one signature. */
const SEAL_BYTES = 128;

/** Rows of the suite. */
export async function* rows(options: BenchOptions): AsyncIterable<Row> {
  if (isWanted(options, 'ETTh1')) yield* publishedSplit(options);
  if (isWanted(options, 'known plant')) yield* knownOptimum();
  yield* openRows(options);
}

async function* publishedSplit(options: BenchOptions): AsyncIterable<Row> {
  const file = options.data === null ? null : join(options.data, 'ETTh1.csv');
  if (file !== null && existsSync(file)) {
    yield* measured(file, 24, { 24: 0.294 });
    yield* measured(file, 96, { 1: 0.106, 24: 0.289, 48: 0.321, 96: 0.358 });
  } else {
    options.note('no ETTh1.csv given with --data: measured cases are left out');
  }
}

async function* measured(file: string, horizon: number, bars: Readonly<Record<number, number>>): AsyncIterable<Row> {
  const name = `ETTh1 H=${horizon}`;
  const site = siteOf(horizon);
  const untilMs = FIRST_MS + SPLIT_ROWS * HOUR_MS;
  const startMs = performance.now();
  const { series, survey, lattices } = await loadHistory([file], site, { zone: 'UTC', untilMs });
  const result = await fitHistory({ series, site, survey, lattices }, FIT_DEFAULTS);
  const seconds = (performance.now() - startMs) / 1000;
  for (const [step, bar] of Object.entries(bars)) {
    const peer = meanUpTo(result, Number(step), 'window ridge');
    const ours = meanUpTo(result, Number(step), null);
    yield row({
      suite: 'accuracy',
      case: `${name}, mse of steps 1..${step}`,
      unit: 'sd²',
      ours,
      peer,
      peerName: 'window ridge',
      better: 'lower',
      bar,
    });
  }
  yield row({
    suite: 'accuracy',
    case: `${name}, sealed bundle`,
    unit: 'bytes',
    ours: result.document.length + SEAL_BYTES,
    better: 'lower',
    bar: 24 * 1024,
  });
  yield row({
    suite: 'accuracy',
    case: `${name}, rounding cost`,
    unit: 'mse ratio',
    ours: result.audit.ratio,
    better: 'lower',
    bar: 1.003,
  });
  yield row({
    suite: 'accuracy',
    case: `${name}, coverage at 90 %, off by`,
    unit: 'share',
    ours: Math.abs(meanCoverage(result) - 0.9),
    better: 'lower',
    bar: 0.015,
  });
  const peerSeconds = ridgeSeconds(series.values, result, horizon);
  yield row({
    suite: 'accuracy',
    case: `${name}, reading, fit and judge`,
    unit: 's',
    ours: seconds,
    peer: peerSeconds,
    peerName: 'window ridge, fit alone',
    better: 'lower',
    bar: horizon === 24 ? 5 : null,
  });
}

async function* knownOptimum(): AsyncIterable<Row> {
  for (const [ticks, bar] of [
    [4000, 0.05],
    [16_000, 0.02],
  ] as const) {
    const plant = knownPlant(ticks, 5);
    const result = await fitHistory(plant.input, FIT_DEFAULTS);
    const ours = result.hindcast.mse.reduce((sum, value) => sum + value, 0) / result.hindcast.mse.length;
    const optimum = plant.optimum(result.judged.fromTick - plant.input.series.firstTick);
    yield row({
      suite: 'accuracy',
      case: `known plant, ${ticks} ticks, excess over the exact filter`,
      unit: 'share',
      ours: ours / optimum - 1,
      better: 'lower',
      bar,
    });
  }
}

/** Mean over signals and steps 1..step, standardised by the learning part. */
function meanUpTo({ hindcast }: FitResult, step: number, rival: string | null): number {
  const H = hindcast.horizon;
  const cells = hindcast.mse.length;
  const r = rival === null ? -1 : hindcast.rivals.indexOf(rival);
  let sum = 0;
  for (let i = 0; i < hindcast.signals.length; i++) {
    for (let h = 0; h < step; h++) {
      const cell = i * H + h;
      const unit = hindcast.mseStandardised[cell]! / hindcast.mse[cell]!;
      sum += r === -1 ? hindcast.mseStandardised[cell]! : hindcast.rivalMse[r * cells + cell]! * unit;
    }
  }
  return sum / (hindcast.signals.length * step);
}

function meanCoverage({ hindcast }: FitResult): number {
  return hindcast.coverage.reduce((sum, value) => sum + value, 0) / hindcast.coverage.length;
}

function ridgeSeconds(values: readonly Float64Array[], result: FitResult, horizon: number): number {
  const learnTicks = result.learn.toTick - result.learn.fromTick;
  const startMs = performance.now();
  for (const y of values) fitWindowRidge(y.subarray(0, learnTicks), horizon, result.chosen.periodTicks);
  return (performance.now() - startMs) / 1000;
}

function siteOf(horizon: number): Site {
  const signals = COLUMNS.flatMap((name) => [`  - name: ${name}`, "    unit: '1'"]);
  const text = [
    'site: transformer',
    'class: transformer',
    'time_zone: UTC',
    'tick: 1h',
    `horizon: ${horizon}`,
    'signals:',
    ...signals,
  ];
  return parseSite(`${text.join('\n')}\n`, 'bench site');
}
