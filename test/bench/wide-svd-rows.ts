/**
 * Rows of the running decomposition: microseconds a row beside the same update in NumPy with the same rows a block, and that
 * both come to the same singular values. NumPy runs on one core and on all; the quicker counts.
 */
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { IncrementalSvd } from '@stillwell/trainer';
import { type BenchOptions, type Row, row } from './harness.ts';
import { FailedRun, measure, peerCommand } from './training-process.ts';

const COLUMNS = 2000;
const RANK = 32;
/** The rank's rows first, then whole blocks of each size. */
const COUNT = RANK + 640;
const REPEATS = 10;
const BLOCKS = [1, 32] as const;
/** Values of both may differ by rounding alone. */
const AGREES = 1e-8;

/** The rows, in order. */
export async function* wideSvdRows(options: BenchOptions): AsyncIterable<Row> {
  const folder = mkdtempSync(join(tmpdir(), 'stillwell-bench-'));
  try {
    const rows = makeRows();
    const file = join(folder, 'rows.f64');
    writeFileSync(file, new Uint8Array(rows.buffer));
    for (const block of BLOCKS) {
      const before = ours(rows, block);
      const theirs = await peer(file, block, options);
      const after = ours(rows, block);
      const micros = Math.min(before.micros, after.micros);
      if (theirs !== null) requireAgreement(before.values, theirs.values, block);
      yield row({
        suite: 'training',
        case: `incremental SVD, rank ${RANK}, ${COLUMNS} features, blocks of ${block}`,
        unit: 'µs a row',
        ours: micros,
        better: 'lower',
        peer: theirs?.micros ?? null,
        peerName: 'numpy, the same update',
        bar: 1,
        barOnRatio: true,
      });
    }
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
}

/** Twelve directions of falling size in noise, by a seeded shift register (Marsaglia 2003). */
function makeRows(): Float64Array {
  let word = 2463534242;
  const draw = (): number => {
    word ^= word << 13;
    word ^= word >>> 17;
    word ^= word << 5;
    return (word >>> 0) / 2 ** 31 - 1;
  };
  const directions = Array.from({ length: 12 }, () => Float64Array.from({ length: COLUMNS }, draw));
  const rows = Float64Array.from({ length: COUNT * COLUMNS }, () => 0.3 * draw());
  for (let i = 0; i < COUNT; i++) {
    directions.forEach((direction, k) => {
      const share = draw() * 0.8 ** k;
      for (let j = 0; j < COLUMNS; j++) rows[i * COLUMNS + j]! += share * direction[j]!;
    });
  }
  return rows;
}

function ours(rows: Float64Array, blockRows: number): { micros: number; values: Float64Array } {
  let micros = Number.POSITIVE_INFINITY;
  let values: Float64Array = new Float64Array(0);
  for (let repeat = 0; repeat < REPEATS; repeat++) {
    const svd = new IncrementalSvd({ columns: COLUMNS, rank: RANK, blockRows });
    const push = (i: number): void => svd.push(rows.subarray(i * COLUMNS, (i + 1) * COLUMNS));
    for (let i = 0; i < RANK; i++) push(i);
    svd.flush();
    const began = performance.now();
    for (let i = RANK; i < COUNT; i++) push(i);
    svd.flush();
    micros = Math.min(micros, ((performance.now() - began) * 1000) / (COUNT - RANK));
    values = svd.factors().singularValues;
  }
  return { micros, values };
}

async function peer(
  file: string,
  block: number,
  { note }: BenchOptions,
): Promise<{ micros: number; values: number[] } | null> {
  const words = [file, COLUMNS, RANK, block, REPEATS].map(String);
  const command = peerCommand('incremental_svd.py', words);
  try {
    const all = await measure(command);
    const single = await measure(['env', 'OPENBLAS_NUM_THREADS=1', ...command]);
    const [first, second] = [all, single].map(({ stdout }) => stdout.trim().split(' ').map(Number));
    return { micros: Math.min(first![0]!, second![0]!), values: first!.slice(1) };
  } catch (cause) {
    if (!(cause instanceof FailedRun)) throw cause;
    note(`incremental SVD: no peer (${cause.message}); apt-get install python3-numpy`);
    return null;
  }
}

/** A quick answer that is another one would be no answer. */
function requireAgreement(values: Float64Array, theirs: readonly number[], block: number): void {
  for (const [k, value] of values.entries()) {
    if (Math.abs(value - theirs[k]!) > AGREES * theirs[0]!)
      throw new Error(
        `incremental SVD, blocks of ${block}: value ${k} is ${value}, expected ${theirs[k]} as numpy has`,
      );
  }
}
