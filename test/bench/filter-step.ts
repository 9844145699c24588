/**
 * What one tick costs on the gateway: fold in a reading of every signal, forecast 60 steps, move and read the bounds, for
 * 8 signals and 32 states with the bank that fits use (8 means, 18 resonators: 44 features a signal). Beside it the same
 * arithmetic as one writes it first (arrays of arrays, fresh ones every tick), and the compiled Kalman filter of
 * statsmodels with as many states and signals, where that is installed.
 */
import { spawnSync } from 'node:child_process';
import { setFlagsFromString } from 'node:v8';
import { runInNewContext } from 'node:vm';
import {
  createBounds,
  createState,
  crossing,
  forecastPath,
  intervalOf,
  type LinearModel,
  saveBounds,
  saveState,
  trackBounds,
  update,
} from '@stillwell/runtime/filter';
import { type BenchOptions, type Row, row } from './harness.ts';
import { PlainFilter } from './plain-filter.ts';

const SIGNALS = 8;
const ORDER = 32;
const BASIS = 16;
const HORIZON = 60;
/** Quantiles are of one round; the quietest round counts, since the other processes of the machine are not on trial. */
const ROUNDS = 5;
const ROUND_TICKS = 4000;
const HEAP_TICKS = 100_000;

/** Seeded uniform numbers in [−1, 1), xorshift32. */
function uniform(seed: number): () => number {
  let x = seed;
  return () => {
    x ^= x << 13;
    x ^= x >>> 17;
    x ^= x << 5;
    return (x | 0) / 2147483648;
  };
}

function benchModel(): LinearModel {
  const random = uniform(2024);
  const draw = (count: number, size: number): Float64Array =>
    Float64Array.from({ length: count }, () => size * random());
  const same = (count: number, value: number): Float64Array => new Float64Array(count).fill(value);
  const resonators = [24, 72, 168].flatMap((tau) =>
    [1, 2, 3, 4, 5, 6].map((m) => ({ size: Math.exp(-1 / tau), angle: (2 * Math.PI * m) / 24 })),
  );
  const features = 8 + 2 * resonators.length;
  return {
    kind: 'linear',
    tickMs: 60_000,
    channelCount: SIGNALS,
    signalCount: SIGNALS,
    featureCount: features,
    order: ORDER,
    basisCount: BASIS,
    horizon: HORIZON,
    decays: Float64Array.from([1.5, 3, 6, 12, 24, 48, 96, 192], (tau) => Math.exp(-1 / tau)),
    resonatorRe: Float64Array.from(resonators, ({ size, angle }) => size * Math.cos(angle)),
    resonatorIm: Float64Array.from(resonators, ({ size, angle }) => size * Math.sin(angle)),
    lags: new Int32Array(0),
    featureScale: same(SIGNALS * features, 1),
    bottleneck: draw(ORDER * SIGNALS * features, 0.02),
    readout: draw(SIGNALS * BASIS * ORDER, 0.05),
    horizonBasis: draw(HORIZON * BASIS, 0.3),
    mean: same(SIGNALS, 10),
    scale: same(SIGNALS, 2),
    latticeStep: same(SIGNALS, 0.01),
    latticeOffset: same(SIGNALS, 0),
    clipLow: same(SIGNALS, -10),
    clipHigh: same(SIGNALS, 30),
    residualScale: same(SIGNALS, 1),
    seasonalPeriod: 1440,
    seasonalBins: 24,
    seasonal: draw(SIGNALS * 24, 0.3),
    coverage: 0.9,
    boundsRate: 0.02,
    radius: Float64Array.from({ length: SIGNALS * HORIZON }, (_, k) => 0.2 * Math.sqrt((k % HORIZON) + 1)),
    rejectSd: 10,
    rejectMaxTicks: 3,
    warmupTicks: 0,
  };
}

/** Readings of a slow wander, one in 16 missing, drawn beforehand and played round and round: drawing allocates. */
function readingSource(seed: number): (tick: number) => Float64Array {
  const random = uniform(seed);
  const wander = new Float64Array(SIGNALS);
  const drawn = Array.from({ length: 4096 }, () =>
    Float64Array.from({ length: SIGNALS }, (_, c) => {
      wander[c] = 0.98 * wander[c]! + 0.1 * random();
      return random() < -0.875 ? Number.NaN : Math.round(1000 + 200 * wander[c]!) / 100;
    }),
  );
  return (tick) => drawn[tick % drawn.length]!;
}

/** One tick of ours, over buffers made once. */
function ourTick(model: LinearModel): { tick: () => void; snapshots: () => number; limits: () => number } {
  const state = createState(model);
  const bounds = createBounds(model);
  const [median, lower, upper] = [0, 1, 2].map(() => new Float64Array(SIGNALS * HORIZON)) as [
    Float64Array,
    Float64Array,
    Float64Array,
  ];
  const readingsOf = readingSource(5);
  return {
    tick: () => {
      const tick = state.tick + 1;
      update(model, state, tick, readingsOf(tick));
      forecastPath(model, state, median);
      trackBounds(model, bounds, state, median);
      intervalOf(model, bounds, state, median, lower, upper);
    },
    snapshots: () => saveState(model, state).length + saveBounds(model, bounds).length,
    limits: () => {
      let sum = 0;
      for (let i = 0; i < SIGNALS; i++) {
        for (const limit of [11, 12]) sum += crossing(model, bounds, state, median, i, limit, 'above').probability;
        for (const limit of [9, 8]) sum += crossing(model, bounds, state, median, i, limit, 'below').probability;
      }
      return sum;
    },
  };
}

/** Median and 99th percentile of a run in microseconds, each of its quietest round. */
function quietest(roundRuns: number, work: () => unknown): { p50: number; p99: number } {
  for (let n = 0; n < 2000; n++) work();
  const least = { p50: Number.POSITIVE_INFINITY, p99: Number.POSITIVE_INFINITY };
  const times = new Float64Array(roundRuns);
  for (let round = 0; round < ROUNDS; round++) {
    for (let n = 0; n < roundRuns; n++) {
      const start = performance.now();
      work();
      times[n] = 1000 * (performance.now() - start);
    }
    times.sort();
    least.p50 = Math.min(least.p50, times[Math.floor(0.5 * (roundRuns - 1))]!);
    least.p99 = Math.min(least.p99, times[Math.floor(0.99 * (roundRuns - 1))]!);
  }
  return least;
}

/**
 * Bytes put on the heap in a tick: growth over the last of many stretches, each after a collection and too short for
 * another, which would hide growth; the last, since the engine goes on compiling for a while and keeps its code there.
 */
function heapGrowth(tick: () => void): number {
  setFlagsFromString('--expose_gc');
  const collect = runInNewContext('gc') as () => void;
  const stretch = HEAP_TICKS / 20;
  let grown = 0;
  for (let done = 0; done < HEAP_TICKS; done += stretch) {
    collect();
    const before = process.memoryUsage().heapUsed;
    for (let n = 0; n < stretch; n++) tick();
    grown = process.memoryUsage().heapUsed - before;
  }
  return Math.max(0, grown / stretch);
}

const STATSMODELS = `
import time, numpy as np
from statsmodels.tsa.statespace.kalman_filter import KalmanFilter
rng = np.random.default_rng(1)
ny, d, T = ${SIGNALS}, ${ORDER}, 4000
k = KalmanFilter(k_endog=ny, k_states=d)
k['design'] = rng.standard_normal((ny, d)) * .2
k['transition'] = np.diag(np.linspace(.5, .99, d))
k['selection'] = np.eye(d)
k['state_cov'] = np.eye(d) * .1
k['obs_cov'] = np.eye(ny) * .1
k.initialize_known(np.zeros(d), np.eye(d))
y = rng.standard_normal((T, ny))
y[rng.random((T, ny)) < .0625] = np.nan
k.bind(y)
best = 1e9
for _ in range(5):
    k.filter(); t = time.perf_counter(); k.filter(); best = min(best, time.perf_counter() - t)
print(1e6 * best / T)
`;

/** Microseconds a step of statsmodels' Kalman filter; null, with a note, where it is not installed. */
function statsmodelsStep(options: BenchOptions): number | null {
  const found: string[] = [];
  // Debian's own first: another python3 earlier in the path does not see Debian's packages.
  for (const python of ['/usr/bin/python3', 'python3']) {
    const ran = spawnSync(python, ['-c', STATSMODELS], { encoding: 'utf8', timeout: 120_000 });
    const micros = Number.parseFloat(ran.stdout ?? '');
    if (ran.status === 0 && micros > 0) return micros;
    found.push(`${python}: ${ran.error?.message ?? (ran.stderr ?? '').trim().split('\n').at(-1)}`);
  }
  options.note(
    `peer left out: statsmodels' Kalman filter (${found.join('; ')}); install the Debian package python3-statsmodels`,
  );
  return null;
}

/** Rows on the filter, for the gateway suite. */
export async function* filterRows(options: BenchOptions): AsyncIterable<Row> {
  const suite = 'gateway';
  const model = benchModel();
  const ours = ourTick(model);
  const mine = quietest(ROUND_TICKS, ours.tick);
  const plain = new PlainFilter(model);
  const readingsOf = readingSource(5);
  let played = 0;
  const theirs = quietest(ROUND_TICKS / 4, () => plain.tick(readingsOf(played++)));
  const what = 'filter step + 60-step forecast with bounds';
  const peerName = 'the same arithmetic, plain nested loops';
  yield row({ suite, case: `${what}, p50`, unit: 'µs', ours: mine.p50, peer: theirs.p50, peerName, better: 'lower' });
  yield row({
    suite,
    case: `${what}, p99`,
    unit: 'µs',
    ours: mine.p99,
    peer: theirs.p99,
    peerName,
    better: 'lower',
    bar: 60,
  });
  const step = statsmodelsStep(options);
  if (step !== null) {
    const peerName = 'statsmodels Kalman step alone, 32 states, no forecast';
    yield row({ suite, case: `${what}, p50`, unit: 'µs', ours: mine.p50, peer: step, peerName, better: 'lower' });
  }
  const limits = quietest(400, ours.limits);
  yield row({ suite, case: 'crossing of 32 limits, p50', unit: 'µs', ours: limits.p50, better: 'lower' });
  yield row({ suite, case: 'heap growth', unit: 'B/tick', ours: heapGrowth(ours.tick), better: 'lower', bar: 1 });
  yield row({ suite, case: 'snapshots of state and bounds', unit: 'B', ours: ours.snapshots(), better: 'lower' });
}
