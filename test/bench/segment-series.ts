/**
 * What the segments suite codes: lattice indices of measured or of synthetic series, with the size of their steps from
 * tick to tick as the prior that a bundle would give.
 */
import { readFileSync } from 'node:fs';
import { join } from 'node:path';
import { latticeIndex } from '@stillwell/protocol';

export interface IndexSeries {
  readonly name: string;
  /** (ticks) rows of (nc) lattice indices. */
  readonly rows: readonly Float64Array[];
  /** The row before the first, known to both sides. */
  readonly before: Float64Array;
  /** (nc) median of |step| × 1.4826, over the part before `rows`. */
  readonly scales: Float64Array;
}

/** The part of the published split that is kept for testing, in rows after the header line. */
const TEST_FROM = 11_520;
const TEST_TO = 14_400;
const DECIMALS = 0.001;

/** ETTh1 of a folder: on its printed decimals, and on the deeper lattice of its converter. */
export function measured(folder: string): IndexSeries[] {
  const lines = readFileSync(join(folder, 'ETTh1.csv'), 'utf8').trim().split('\n').slice(1);
  const values = lines.map((line) => line.split(',').slice(1).map(Number));
  const count = values[0]!.length;
  const printed = new Array<number>(count).fill(DECIMALS);
  const learnt = values.slice(0, TEST_FROM);
  const deeper = printed.map((_, c) => deeperStep(learnt.map((row) => row[c]!)));
  return [series('ETTh1 step 0.001', values, printed), series('ETTh1 deeper step', values, deeper)];
}

function series(name: string, values: readonly (readonly number[])[], steps: readonly number[]): IndexSeries {
  const rows = values.map((row) => Float64Array.from(row, (v, c) => latticeIndex(v, steps[c]!, 0)));
  return part(name, rows, TEST_FROM, TEST_TO);
}

function part(name: string, rows: readonly Float64Array[], from: number, to: number): IndexSeries {
  const scales = Float64Array.from(rows[0]!, (_, c) => {
    const steps = Array.from({ length: from - 1 }, (_, t) => Math.abs(rows[t + 1]![c]! - rows[t]![c]!));
    steps.sort((a, b) => a - b);
    return 1.4826 * steps[steps.length >> 1]!;
  });
  return { name, rows: rows.slice(from, to), before: rows[from - 1]!, scales };
}

/**
 * Step q of which the printed values are multiples rounded to DECIMALS: the q in 0.02..0.1 that explains most of them.
 * Values that it does not explain go to their nearest multiple, so the figure on this lattice leaves exceptions out.
 */
function deeperStep(values: readonly number[]): number {
  const sample = values.filter((_, i) => i % 7 === 0);
  let [best, bestShare] = [0, 0];
  for (let q = 0.1; q > 0.02; q -= 0.000_02) {
    const share = explained(sample, q);
    if (share > bestShare * 1.02) [best, bestShare] = [q, share];
  }
  const centre = best;
  for (let q = centre - 0.000_05; q < centre + 0.000_05; q += 0.000_000_1) {
    const share = explained(values, q);
    if (share > bestShare) [best, bestShare] = [q, share];
  }
  return best;
}

function explained(values: readonly number[], q: number): number {
  let count = 0;
  for (const value of values) if (Math.abs(Math.round(value / q) * q - value) < 0.6 * DECIMALS) count++;
  return count / values.length;
}

/** A wet well of our own, a minute a tick: level, pump, flow, power, oil temperature, setpoint, hatch, starts. */
export function synthetic(): IndexSeries {
  const next = generator(20_260_103);
  const rows: Float64Array[] = [];
  let [level, pump, oil, hatch, starts] = [1500, 0, 180, 0, 0];
  for (let t = 0; t < 5760; t++) {
    const inflow = 20 + 12 * Math.sin((2 * Math.PI * t) / 1440) + 2 * normal(next);
    level += inflow - (pump === 1 ? 70 : 0);
    if (level > 2000 && pump === 0) {
      pump = 1;
      starts++;
    } else if (level < 1000) pump = 0;
    oil += 0.15 * normal(next) + 0.02 * ((pump === 1 ? 260 : 180) - oil);
    if (next() < (hatch === 1 ? 0.3 : 0.02)) hatch = 1 - hatch;
    const flow = pump * (700 + 9 * normal(next));
    const power = pump === 1 ? 110 + 1.5 * normal(next) : 4;
    const row = [level + 2 * normal(next), pump, flow, power, oil, 450, hatch, starts];
    rows.push(Float64Array.from(row, (v) => Math.round(v)));
  }
  return part('synthetic wet well', rows, 2880, 5760);
}

/** Numerical Recipes' linear congruential generator; a benchmark needs the same numbers everywhere, not good ones. */
function generator(seed: number): () => number {
  let state = seed;
  return () => {
    state = (Math.imul(state, 1_664_525) + 1_013_904_223) >>> 0;
    return (state >>> 8) / 2 ** 24;
  };
}

/** Sum of twelve uniforms, less six: variance 1. */
function normal(next: () => number): number {
  let sum = -6;
  for (let i = 0; i < 12; i++) sum += next();
  return sum;
}
