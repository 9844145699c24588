/**
 * Rows of the factors: gathering a long record beside its lagged products by NumPy's transforms, and the moments of a bank
 * from readings to the end beside the products of its features by NumPy. Both come to the same numbers, or there is no row.
 */
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { type Factors, FactorsGatherer, momentsFromFactors } from '@stillwell/trainer';
import { type BenchOptions, type Row, row } from './harness.ts';
import { FailedRun, measure, peerCommand } from './training-process.ts';

const CHANNELS = 8;
const TICKS = 1_000_000;
const CHUNK = 16_384;
const REACH = 65_536;
const HORIZON = 60;
const REPEATS = 3;
/** Sums of a million products by transforms, and features whose last origins are a horizon before the end here. */
const LAGS_AGREE = 1e-9;
const FEATURES_AGREE = 1e-3;

/** The rows, in order. */
export async function* factorsRows(options: BenchOptions): AsyncIterable<Row> {
  const folder = mkdtempSync(join(tmpdir(), 'stillwell-bench-'));
  try {
    const file = join(folder, 'rows.f64');
    const poles = join(folder, 'poles.json');
    const values = makeRecord();
    writeFileSync(file, rowsOf(values));
    writeFileSync(poles, JSON.stringify(polesOfBank()));
    const gathered = quickest(() => gather(values));
    const { sums } = gathered.result;
    const places = sums.lagged.length / CHANNELS ** 2;
    const lags = await peer(options, [file, CHANNELS, 'lags', REACH]);
    if (lags !== null)
      requireAgreement(
        [0, 1, 10].map((k) => sums.lagged[places + k]!),
        lags.checks.slice(0, 3),
        LAGS_AGREE,
      );
    yield factorsRow(
      'lagged products of 1,000,000 ticks x 8 channels',
      gathered.seconds,
      lags,
      'numpy, Fourier transforms',
    );
    const bank = quickest(() => moments(gather(values)));
    const features = await peer(options, [file, CHANNELS, 'features', poles]);
    if (features !== null) requireAgreement([...bank.result.slice(0, 4)], features.checks, FEATURES_AGREE);
    yield factorsRow('moments of a bank over the same', bank.seconds, features, 'numpy, products of its features');
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
}

function factorsRow(name: string, seconds: number, peer: Told | null, peerName: string): Row {
  return row({
    suite: 'training',
    case: `factors, ${name}`,
    unit: 's',
    ours: seconds,
    better: 'lower',
    peer: peer?.seconds ?? null,
    peerName,
    bar: 1,
    barOnRatio: true,
  });
}

/** Means an octave apart and the resonators of a day of minutes, as complex numbers. */
function polesOfBank(): (readonly [number, number])[] {
  const means = Array.from({ length: 13 }, (_, k) => [Math.exp(-1 / (1.5 * 2 ** k)), 0] as const);
  const turns = [1440, 4320].flatMap((memory) =>
    Array.from({ length: 6 }, (_, m) => {
      const radius = Math.exp(-1 / memory);
      const angle = (2 * Math.PI * (m + 1)) / 1440;
      return [radius * Math.cos(angle), radius * Math.sin(angle)] as const;
    }),
  );
  return [...means, ...turns];
}

/** Slow wanderers about a daily wave, by a seeded shift register (Marsaglia 2003). */
function makeRecord(): Float64Array[] {
  let word = 2463534242;
  const draw = (): number => {
    word ^= word << 13;
    word ^= word >>> 17;
    word ^= word << 5;
    return (word >>> 0) / 2 ** 31 - 1;
  };
  return Array.from({ length: CHANNELS }, (_, c) => {
    let level = 0;
    return Float64Array.from({ length: TICKS }, (_, t) => {
      level = 0.98 * level + draw();
      return 20 + level + Math.sin((2 * Math.PI * t) / 1440 + c);
    });
  });
}

function rowsOf(values: readonly Float64Array[]): Uint8Array {
  const rows = new Float64Array(TICKS * CHANNELS);
  values.forEach((column, c) => {
    for (let t = 0; t < TICKS; t++) rows[t * CHANNELS + c] = column[t]!;
  });
  return new Uint8Array(rows.buffer);
}

function gather(values: readonly Float64Array[]): Factors {
  const names = values.map((_, c) => `channel ${c}`);
  const gatherer = new FactorsGatherer({
    site: 'bench',
    tickMs: 60_000,
    names,
    units: names,
    signalCount: CHANNELS,
    schema: '00',
    halfLifeTicks: null,
    reach: REACH,
    longestHorizon: 2 * HORIZON,
    longestRound: 0,
    longGapTicks: HORIZON,
  });
  const digest = new Uint8Array(32);
  for (let t = 0; t < TICKS; t += CHUNK) {
    const end = Math.min(TICKS, t + CHUNK);
    const chunk = values.map((column) => column.subarray(t, end));
    gatherer.take({
      tickMs: 60_000,
      firstTick: t,
      ticks: end - t,
      names,
      signalCount: CHANNELS,
      values: chunk,
      digest,
    });
  }
  // The newest reading waits for its next.
  const again = values.map((column) => column.subarray(TICKS - 1));
  gatherer.take({ tickMs: 60_000, firstTick: TICKS, ticks: 1, names, signalCount: CHANNELS, values: again, digest });
  return gatherer.end();
}

function moments(factors: Factors): Float64Array {
  const poles = polesOfBank();
  const bank = {
    decays: poles.filter(([, im]) => im === 0).map(([re]) => re),
    resonators: poles.filter(([, im]) => im !== 0),
    lags: [],
  };
  const scalings = factors.names.map(() => ({ mean: 20, scale: 1, clipLow: -1e9, clipHigh: 1e9, isConstant: false }));
  const wish = { bank, horizon: HORIZON, scalings, signalCount: CHANNELS, round: null };
  return momentsFromFactors(factors, wish).features;
}

function quickest<T>(run: () => T): { readonly seconds: number; readonly result: T } {
  let seconds = Number.POSITIVE_INFINITY;
  let result = run();
  for (let repeat = 0; repeat < REPEATS; repeat++) {
    const began = performance.now();
    result = run();
    seconds = Math.min(seconds, (performance.now() - began) / 1000);
  }
  return { seconds, result };
}

/** What a peer says: seconds, and numbers to compare. */
interface Told {
  readonly seconds: number;
  readonly checks: readonly number[];
}

async function peer({ note }: BenchOptions, words: readonly (string | number)[]): Promise<Told | null> {
  try {
    const command = peerCommand('lagged_products.py', words.map(String));
    const { stdout } = await measure(command);
    const [seconds, ...checks] = stdout.trim().split(' ').map(Number);
    return { seconds: seconds!, checks };
  } catch (cause) {
    if (!(cause instanceof FailedRun)) throw cause;
    note(`factors: no peer (${cause.message}); apt-get install python3-numpy python3-scipy`);
    return null;
  }
}

/** A quick answer that is another one would be no answer. */
function requireAgreement(values: readonly number[], theirs: readonly number[], tolerance: number): void {
  values.forEach((value, k) => {
    const largest = Math.max(...theirs.map(Math.abs));
    if (Math.abs(value - theirs[k]!) > tolerance * largest) {
      throw new Error(`factors: number ${k} is ${value}, expected ${theirs[k]} as numpy has`);
    }
  });
}
