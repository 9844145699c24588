/**
 * Rows of suite `training` on wide rows: what structured random features and projections cost and how near they come, and two
 * long cases in processes of their own, whose memory is theirs alone.
 */
import { fileURLToPath } from 'node:url';
import {
  createFeatures,
  createProjection,
  type FeatureKind,
  type FeatureMap,
  independentVariance,
  johnsonLindenstrauss,
  orthogonalVariance,
  sparseProjection,
  WindowProjection,
} from '@stillwell/trainer';
import { type BenchOptions, type Row, row } from './harness.ts';
import { PIXELS, thermalCamera } from './thermal-camera.ts';
import { measure, type Ran } from './training-process.ts';

const suite = 'training';
/** Rounds of each timing at least, and milliseconds of it; the least counts, since others may be at work on the machine. */
const ROUNDS = 30;
const LEAST_MS = 150;

/** Costs and errors of random features: seconds. */
export async function* featureRows({ note }: BenchOptions): AsyncIterable<Row> {
  yield* featureCosts();
  yield* featureErrors(note);
}

/** 90,000 windows x 100,000 features, rank 10: minutes. */
export async function* wideWindowRows({ note }: BenchOptions): AsyncIterable<Row> {
  const name = 'wide windows: 90,000 x 100,000 features, rank 10';
  const { ran, told } = await childOf('wide-windows.js');
  yield row({ suite, case: `${name}: time`, unit: 'min', ours: told.seconds! / 60, better: 'lower', bar: 60 });
  yield row({ suite, case: `${name}: peak`, unit: 'MB', ours: ran.peakMb, better: 'lower', bar: GIBIBYTE });
  const rival = Math.min(told.held!, told.mean!);
  yield row({
    ...{ suite, case: `${name}: held-out error`, unit: 'squares', ours: told.ours!, better: 'lower', bar: 1 },
    ...{ peer: rival, peerName: 'newest reading or mean', barOnRatio: true },
  });
  note(
    `${name}: of ${told.seconds!.toFixed(0)} s the features took ${told.featureSeconds!.toFixed(0)}; ${percent(told.discarded!)} of the energy let go, ` +
      `departure from orthogonality ${told.orthogonality!.toExponential(1)}; aims 12 min and 600 MB; a covariance would have taken 80 GB`,
  );
}

/** One hour of a 320 x 240 camera at 25 frames a second, windows of 50 frames: minutes. */
export async function* wideCameraRows({ note }: BenchOptions): AsyncIterable<Row> {
  const name = 'wide camera: one hour, 50 frames a window';
  const { ran, told } = await childOf('wide-camera.js');
  yield row({ suite, case: `${name}: time`, unit: 'min', ours: told.seconds! / 60, better: 'lower', bar: 60 });
  yield row({ suite, case: `${name}: peak`, unit: 'MB', ours: ran.peakMb, better: 'lower', bar: GIBIBYTE });
  yield row({ suite, case: `${name}: skill`, unit: 'share', ours: told.skill!, better: 'higher', bar: 0.01 });
  note(
    `${name}: ${told.order} states; reading and projecting took ${told.read!.toFixed(0)} s of ${told.seconds!.toFixed(0)}, of which generating ` +
      `about ${told.generating!.toFixed(0)}; ${percent(told.discarded!)} of the energy let go; skill is the share of squared error saved beside the ` +
      'better of newest and mean frame; aims 15 min and 600 MB; a Gram matrix of 90,000 windows would have taken 65 GB',
  );
}

/** Megabytes. */
const GIBIBYTE = 1073.741824;

async function childOf(script: string): Promise<{ ran: Ran; told: Partial<Record<string, number>> }> {
  const ran = await measure([process.execPath, fileURLToPath(new URL(`./${script}`, import.meta.url))]);
  return { ran, told: JSON.parse(ran.stdout) as Partial<Record<string, number>> };
}

const SIZES = [512, 1024, 2048, 4096] as const;

/** As many features as inputs: microseconds, and the power of the size that they grow with. */
function* featureCosts(): Iterable<Row> {
  const cost = (kind: FeatureKind): number[] =>
    SIZES.map((n) => microseconds(createFeatures({ inputs: n, outputs: 2 * n, width: 1, seed: 1 }, kind)));
  const [plain, fastfood, orthogonal] = [cost('plain'), cost('fastfood'), cost('orthogonal')];
  const common = { suite, unit: 'us', better: 'lower', peerName: 'plain random features' } as const;
  for (const [k, n] of SIZES.entries())
    yield row({
      ...{ ...common, case: `features: ${2 * n} of ${n} inputs`, ours: orthogonal[k]!, peer: plain[k]! },
      ...{ bar: 1, barOnRatio: true },
    });
  yield row({ ...common, case: 'features: 8192 of 4096 inputs, Fastfood', ours: fastfood[3]!, peer: plain[3]! });
  // n log n from 512 to 4096 is a power of 1.14; plain ones grow with the square.
  yield row({
    ...{ ...common, case: 'features: growth with their number', unit: 'exponent', ours: exponent(orthogonal) },
    ...{ peer: exponent(plain), bar: 1.3 },
  });
  const many = createFeatures({ inputs: 512, outputs: 100_000, width: 1, seed: 1 });
  yield row({ suite, case: 'features: 100,000 of 512 inputs', unit: 'us', ours: microseconds(many), better: 'lower' });
  yield row({ suite, case: 'features: 100,000 of 512 inputs', unit: 'kB', ours: many.bytes / 1000, better: 'lower' });
}

/** Root of the mean squared error of the kernel, 1024 features of 64 inputs, 400 maps, half to two widths apart. */
function* featureErrors(note: (line: string) => void): Iterable<Row> {
  const error = (kind: FeatureKind): number => Math.sqrt(meanSquare(kind, 400));
  const [plain, fastfood, orthogonal] = [error('plain'), error('fastfood'), error('orthogonal')];
  const common = { suite, unit: 'rms error', better: 'lower', peer: plain, peerName: 'plain random features' } as const;
  yield row({ ...common, case: 'features: kernel error at equal count', ours: orthogonal, bar: 1, barOnRatio: true });
  yield row({ ...common, case: 'features: kernel error, Fastfood', ours: fastfood });
  const theory = (variance: (distance: number) => number): string =>
    Math.sqrt(DISTANCES.reduce((sum, one) => sum + variance(one), 0) / DISTANCES.length).toPrecision(4);
  note(
    `features: theory says ${theory((one) => independentVariance(Math.exp(-one * one * 0.5), 1024))} for independent frequencies and ` +
      `${theory((one) => orthogonalVariance(one, 1024, 64))} for orthogonal ones`,
  );
}

const DISTANCES = [0.5, 1, 1.5, 2] as const;

function meanSquare(kind: FeatureKind, maps: number): number {
  const [inputs, outputs] = [64, 1024];
  const [a, b] = [new Float32Array(outputs), new Float32Array(outputs)];
  let sum = 0;
  for (let seed = 0; seed < maps; seed++) {
    const map = createFeatures({ inputs, outputs, width: 1, seed }, kind);
    const way = Float32Array.from({ length: inputs }, (_, k) => Math.sin((seed + 1) * (k + 1) * 1.7));
    const length = Math.hypot(...way);
    map.apply(new Float32Array(inputs), a);
    for (const distance of DISTANCES) {
      const x = way.map((value) => (value * distance) / length);
      map.apply(x, b);
      const product = a.reduce((total, value, j) => total + value * b[j]!, 0);
      sum += (product - Math.exp((-distance * distance) / 2)) ** 2;
    }
  }
  return sum / (maps * DISTANCES.length);
}

/** A frame of the camera, and a window of 50 of them, to the numbers that keep 90,000 frames apart within a fifth. */
export async function* projectionRows({ note }: BenchOptions): AsyncIterable<Row> {
  const outputs = Math.ceil(johnsonLindenstrauss(90_000, 0.2) / 4) * 4;
  const shape = { inputs: PIXELS, outputs, seed: 1 };
  const map = createProjection(shape);
  const sketch = microseconds(sparseProjection(shape, 1));
  yield row({
    ...{ suite, case: `projection: a frame to ${outputs} numbers`, unit: 'us', ours: microseconds(map) },
    ...{ better: 'lower', peer: sketch, peerName: 'count sketch', bar: 2, barOnRatio: true },
  });
  const frames = cameraFrames(60);
  const window = new WindowProjection({ projection: map, frames: 50, form: 'summed', seed: 1 });
  for (const frame of frames) window.push(frame);
  const out = new Float32Array(window.outputs);
  const started = microsecondsOf(() => {
    window.push(frames[0]!);
    window.write(out);
  });
  yield row({
    ...{ suite, case: 'projection: a window of 50 frames, moved by one', unit: 'us', ours: started, better: 'lower' },
    bar: 40_000,
  });
  yield row({
    ...{ suite, case: 'projection: worst change of a squared distance', unit: 'share', ours: worstChange(map, frames) },
    ...{ better: 'lower', bar: 0.2 },
  });
  note('projection: the bar of the window is the time from frame to frame; distances among 60 frames of the camera');
}

function cameraFrames(count: number): Float32Array[] {
  const camera = thermalCamera(2);
  return Array.from({ length: count }, () => {
    const frame = new Float32Array(PIXELS);
    for (let k = 0; k < 25; k++) camera.next(frame);
    return frame;
  });
}

function worstChange(map: FeatureMap, frames: readonly Float32Array[]): number {
  const small = frames.map((frame) => {
    const out = new Float32Array(map.outputs);
    map.apply(frame, out);
    return out;
  });
  const square = (a: Float32Array, b: Float32Array): number =>
    a.reduce((sum, value, k) => sum + (value - b[k]!) ** 2, 0);
  let worst = 0;
  for (let i = 0; i < frames.length; i++)
    for (let j = 0; j < i; j++)
      worst = Math.max(worst, Math.abs(square(small[i]!, small[j]!) / square(frames[i]!, frames[j]!) - 1));
  return worst;
}

function microseconds(map: FeatureMap): number {
  const x = Float32Array.from({ length: map.inputs }, (_, k) => Math.sin(k * k));
  const out = new Float32Array(map.outputs);
  return microsecondsOf(() => map.apply(x, out));
}

function microsecondsOf(work: () => void): number {
  let least = Number.POSITIVE_INFINITY;
  const begun = performance.now();
  for (let k = 0; k < ROUNDS || performance.now() - begun < LEAST_MS; k++) {
    const started = performance.now();
    work();
    least = Math.min(least, performance.now() - started);
  }
  return 1000 * least;
}

/** Slope of cost against size, both as logarithms, by least squares. */
function exponent(cost: readonly number[]): number {
  const x = SIZES.map((size) => Math.log(size));
  const y = cost.map((one) => Math.log(one));
  const [mx, my] = [mean(x), mean(y)];
  const over = x.reduce((sum, one, k) => sum + (one - mx) * (y[k]! - my), 0);
  return over / x.reduce((sum, one) => sum + (one - mx) ** 2, 0);
}

function mean(values: readonly number[]): number {
  return values.reduce((sum, one) => sum + one, 0) / values.length;
}

function percent(share: number): string {
  return `${(100 * share).toFixed(1)} %`;
}
