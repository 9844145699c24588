/**
 * Learns a condenser from projected frames: scale, joint rows, their running decomposition, the predictive state, and how
 * many of its states are worth their place, in memory for a few windows and the factors.
 */
import { TrainError } from '../errors.ts';
import { chooseStates } from './condense-choose.ts';
import type { Condenser, CondenserShape } from './condenser.ts';
import { IncrementalSvd, svdBytes } from './incremental-svd.ts';
import { medianWidth } from './kernel-width.ts';
import { featuresOf, JointRows, type LiftShape, PastFeatures } from './past-features.ts';
import type { ProjectedFrames } from './projected-frames.ts';

/** Shares of the recording: learned from, then order chosen by; the rest is held out. */
const LEARN_SHARE = 0.6;
const CHOOSE_SHARE = 0.2;
/** Windows that each part must hold at least. */
const LEAST_WINDOWS = 50;
/** Windows looked at for the width, mean and scale of random features. */
const SAMPLE = 1000;

/** What a person may ask for. */
export interface LearnOptions {
  readonly shape: CondenserShape;
  readonly source: string;
  /** Singular triplets kept. */
  readonly rank: number;
  /** States; null: as many as pay, up to `mostStates`. */
  readonly order: number | null;
  readonly mostStates: number;
  readonly progress: (done: number, total: number) => void;
}

/** Frames at which the parts end. */
export function parts(count: number): { readonly learn: number; readonly choose: number } {
  return { learn: Math.floor(LEARN_SHARE * count), choose: Math.floor((LEARN_SHARE + CHOOSE_SHARE) * count) };
}

/** Numbers in a joint row of that shape. */
export function jointColumns({ window, horizon, numbers, features }: CondenserShape): number {
  const past = window * numbers + features;
  return (features === 0 ? past : 2 * past) + horizon * numbers;
}

/** Bytes that learning takes, beside the program itself. */
export function learningBytes(shape: CondenserShape, rank: number): number {
  const columns = jointColumns(shape);
  const projection = shape.frameLength > shape.numbers ? 8 * (shape.frameLength + shape.numbers) : 0;
  // The factors once more as they are handed on, and parts of them while states are made.
  return svdBytes({ columns, rank }) + 2 * 8 * columns * rank + projection + 8 * shape.features * 4 + (8 << 20);
}

/**
 * Learns.
 *
 * throws  TrainError 'history' for a recording too short, or one in which nothing moves
 */
export function learnCondenser(frames: ProjectedFrames, options: LearnOptions): Condenser {
  const { shape, rank } = options;
  const { learn, choose } = parts(frames.count);
  requireLength(frames, shape, learn, choose);
  const { mean, scale } = standardScale(frames, learn, options.source);
  frames.standardise(mean, scale);
  const lift = liftOf(frames, shape, learn);
  const past = new PastFeatures(shape.window, shape.numbers, lift);
  const rows = new JointRows(past, shape.window, shape.horizon, shape.numbers);
  const svd = new IncrementalSvd({ columns: rows.columns, rank });
  const span = shape.window + shape.horizon;
  frames.visit(span, 0, learn, (row, first) => {
    svd.push(rows.of(row, first));
    options.progress(first, learn);
  });
  const factors = svd.factors();
  const found = chooseStates({ frames, factors, layout: rows.layout, past, shape, learn, choose }, options);
  return {
    shape,
    record: {
      source: options.source,
      frames: frames.count,
      startMs: frames.timeOf(0),
      learnedUntilMs: frames.timeOf(learn),
      decidedUntilMs: frames.timeOf(choose),
      rank: factors.rank,
      order: found.order,
      rows: factors.rows,
      energy: factors.energy,
      discarded: factors.discarded,
      ridge: found.ridge,
      radius: found.radius,
      orthogonality: factors.orthogonality,
      scale,
      featureWidth: lift.width,
      featureScale: lift.scale,
    },
    mean,
    featureMean: lift.mean,
    stateMap: found.stateMap,
    forecastMap: found.forecastMap,
    own: found.own,
    transition: found.transition,
    singularValues: factors.singularValues,
    explained: found.explained,
  };
}

function requireLength(frames: ProjectedFrames, shape: CondenserShape, learn: number, choose: number): void {
  const span = shape.window + shape.horizon;
  for (const [from, to] of [
    [0, learn],
    [learn, choose],
    [choose, frames.count],
  ]) {
    let windows = 0;
    for (const stretch of frames.stretches)
      windows += Math.max(0, Math.min(stretch.to, to) - Math.max(stretch.from, from) - span + 1);
    if (windows >= LEAST_WINDOWS) continue;
    const least = Math.ceil((span + LEAST_WINDOWS) / CHOOSE_SHARE);
    throw new TrainError(
      'history',
      `The recording has ${frames.count} frames; expected at least ${least} without a break for windows of ` +
        `${shape.window} frames and forecasts of ${shape.horizon}. Give a longer recording, or a smaller --window and --horizon.`,
      { details: { frames: frames.count, least } },
    );
  }
}

/** Mean of each number over the learning part, and the root mean square of what is left: one scale keeps distances. */
function standardScale(frames: ProjectedFrames, learn: number, source: string): { mean: Float64Array; scale: number } {
  const mean = new Float64Array(frames.numbers);
  let count = 0;
  frames.visit(1, 0, learn, (row) => {
    count++;
    for (let j = 0; j < row.length; j++) mean[j] += (row[j] - mean[j]) / count;
  });
  let square = 0;
  let level = 0;
  frames.visit(1, 0, learn, (row) => {
    for (let j = 0; j < row.length; j++) square += (row[j] - mean[j]) ** 2;
  });
  for (const value of mean) level += value * value;
  const scale = Math.sqrt(square / (count * frames.numbers));
  // Projected numbers are float32: what moves less than their rounding does not move.
  if (scale > 1e-6 * Math.sqrt(level / frames.numbers) && scale > 0) return { mean, scale };
  throw new TrainError(
    'history',
    `${source}: expected frames that change, got the same frame throughout the first ${count}; check the sensor's recording.`,
  );
}

/** Random features: as wide as windows are apart, less their mean, and together as large as the window. */
function liftOf(frames: ProjectedFrames, shape: CondenserShape, learn: number): LiftShape {
  const { features, seed, window, numbers } = shape;
  if (features === 0) return { features, width: 0, seed, mean: new Float64Array(0), scale: 0 };
  const length = window * numbers;
  const stride = Math.max(1, Math.floor(learn / SAMPLE));
  const held: Float32Array[] = [];
  frames.visit(window, 0, learn, (row) => void held.push(Float32Array.from(row)), stride);
  const rows = new Float32Array(held.length * length);
  held.forEach((row, k) => {
    rows.set(row, k * length);
  });
  const width = medianWidth(rows, held.length, seed);
  const map = featuresOf(length, { features, width, seed });
  const out = new Float32Array(features);
  const mean = new Float64Array(features);
  let square = 0;
  for (const row of held) {
    map?.apply(row, out);
    for (let k = 0; k < features; k++) {
      mean[k] += out[k] / held.length;
      square += out[k] * out[k];
    }
  }
  const spread = square / held.length - mean.reduce((sum, value) => sum + value * value, 0);
  return { features, width, seed, mean, scale: spread > 1e-12 ? Math.sqrt(length / spread) : 1 };
}
