/** The published split of a measured series: error by step beside the window ridge, size, rounding, coverage, loss and disturbance. */
import { existsSync } from 'node:fs';
import { join } from 'node:path';
import { parseSite, type Site } from '@stillwell/protocol';
import { FIT_DEFAULTS, type FitResult, fit as fitHistory, fitWindowRidge, loadHistory } from '@stillwell/trainer';
import { meanOf } from './accuracy-errors.ts';
import { robustRows } from './accuracy-robust.ts';
import type { BenchOptions, Row } from './harness.ts';
import { isWanted, row } from './harness.ts';

/** The published split keeps 12, 4 and 4 months of 30 days. */
const SPLIT_ROWS = 14_400;
const FIRST_MS = Date.UTC(2016, 6, 1);
const HOUR_MS = 3_600_000;
const COLUMNS = ['HUFL', 'HULL', 'MUFL', 'MULL', 'LUFL', 'LULL', 'OT'];
/** Head of an envelope and one signature. */
const SEAL_BYTES = 128;
const NOMINAL = 0.9;
const CASES = ['ETTh1 H=24', 'ETTh1 dense', 'ETTh1 H=96'] as const;
/** A dense recursion where bytes are short: what it may take, its most states and most error. */
const DENSE = { maxBytes: 11_000, horizon: 24, order: 42, mse: 0.3 } as const;
type FitInput = Parameters<typeof fitHistory>[0];

/** All rows on ETTh1, or a line that says they are left out. */
export async function* splitRows(options: BenchOptions): AsyncIterable<Row> {
  if (!CASES.some((name) => isWanted(options, name))) return;
  const file = options.data === null ? null : join(options.data, 'ETTh1.csv');
  if (file === null || !existsSync(file)) {
    options.note('no ETTh1.csv given with --data: measured cases are left out');
    return;
  }
  if (isWanted(options, CASES[0])) yield* measured(file, 24, { 24: 0.294 });
  if (isWanted(options, CASES[1])) yield* dense(file, options);
  if (isWanted(options, CASES[2])) yield* measured(file, 96, { 1: 0.106, 24: 0.289, 48: 0.321, 96: 0.358 });
}

async function load(file: string, horizon: number): Promise<FitInput> {
  const site = siteOf(horizon);
  const untilMs = FIRST_MS + SPLIT_ROWS * HOUR_MS;
  const { series, survey, lattices } = await loadHistory([file], site, { zone: 'UTC', untilMs });
  return { series, site, survey, lattices };
}

/** The smallest machine: a recursion whose whole memory is its state. */
async function* dense(file: string, options: BenchOptions): AsyncIterable<Row> {
  const input = await load(file, DENSE.horizon);
  let result: FitResult;
  try {
    result = await fitHistory(input, { ...FIT_DEFAULTS, kind: 'dense', maxBytes: DENSE.maxBytes });
  } catch (error) {
    options.note(`ETTh1 dense: no model of that kind: ${(error as Error).message}`);
    return;
  }
  const name = `ETTh1 dense H=${DENSE.horizon}`;
  yield row({
    suite: 'accuracy',
    case: `${name}, mse of steps 1..${DENSE.horizon}`,
    unit: 'sd²',
    ours: meanUpTo(result, DENSE.horizon, null),
    peer: meanUpTo(result, DENSE.horizon, 'window ridge'),
    peerName: 'window ridge',
    better: 'lower',
    bar: DENSE.mse,
  });
  yield row({
    suite: 'accuracy',
    case: `${name}, states`,
    unit: 'count',
    ours: result.model.order,
    better: 'lower',
    bar: DENSE.order,
  });
}

async function* measured(file: string, horizon: number, bars: Readonly<Record<number, number>>): AsyncIterable<Row> {
  const name = `ETTh1 H=${horizon}`;
  const startMs = performance.now();
  const input = await load(file, horizon);
  const { series } = input;
  const result = await fitHistory(input, FIT_DEFAULTS);
  const seconds = (performance.now() - startMs) / 1000;
  for (const [step, bar] of Object.entries(bars)) {
    yield row({
      suite: 'accuracy',
      case: `${name}, mse of steps 1..${step}`,
      unit: 'sd²',
      ours: meanUpTo(result, Number(step), null),
      peer: meanUpTo(result, Number(step), 'window ridge'),
      peerName: 'window ridge',
      better: 'lower',
      bar,
    });
  }
  yield* properties(name, result);
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
  if (horizon === 24) yield* robustRows(name, result, series);
}

function* properties(name: string, result: FitResult): Iterable<Row> {
  const { coverage } = result.hindcast;
  const figure = (what: string, unit: string, ours: number, bar: number): Row =>
    row({ suite: 'accuracy', case: `${name}, ${what}`, unit, ours, better: 'lower', bar });
  const worst = Math.max(...coverage.map((share) => Math.abs(share - NOMINAL)));
  yield figure('sealed bundle', 'bytes', result.document.length + SEAL_BYTES, 24 * 1024);
  yield figure('rounding cost', 'mse ratio', result.audit.ratio, 1.003);
  yield figure('coverage at 90 %, off by', 'share', Math.abs(meanOf(coverage) - NOMINAL), 0.015);
  yield figure('coverage at 90 %, worst signal and step off by', 'share', worst, 0.035);
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
