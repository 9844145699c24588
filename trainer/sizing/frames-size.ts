/** Observations that are wide: camera frames, spectra, bins of vibration, in windows of several. */
import { statSync } from 'node:fs';
import { TrainError } from '../errors.ts';
import { BYTES } from './constants.ts';
import { covarianceOf, gramOf, type Matrix } from './matrix-size.ts';

const FLOAT32_BYTES = 4;

/** What they come to. */
export interface FramesSize {
  readonly frames: number;
  readonly frameLength: number;
  /** Frames in a window. */
  readonly window: number;
  /** Whole windows: one ends at each frame from the window-th on. */
  readonly windows: number;
  /** Numbers in a window. */
  readonly features: number;
  /** Of one window as float32, the smallest that is ever held whole. */
  readonly windowBytes: number;
  readonly covariance: Matrix;
  readonly gram: Matrix;
}

/** What `stillwell condense` makes of them with its defaults but for the window. */
export interface CondenseSize {
  /** Numbers that a frame is projected to. */
  readonly numbers: number;
  readonly horizon: number;
  readonly rank: number;
  /** Peak of the resident memory, however many frames there are. */
  readonly peakBytes: number;
}

/** Defaults of `stillwell condense`. */
const HORIZON = 16;
const RANK = 32;

/** Foresees it. */
export async function condenseSize({ frameLength, window }: FramesSize): Promise<CondenseSize> {
  const [{ learningBytes }, { DEFAULT_NUMBERS }] = await Promise.all([
    import('../wide/condense-learn.ts'),
    import('../wide/project-frames.ts'),
  ]);
  const numbers = Math.min(frameLength, DEFAULT_NUMBERS);
  const shape = { frameLength, tickMs: 1, numbers, window, horizon: HORIZON, features: 0, seed: 1 };
  return { numbers, horizon: HORIZON, rank: RANK, peakBytes: (BYTES.program as number) + learningBytes(shape, RANK) };
}

/** Counts. */
export function framesSize(frames: number, frameLength: number, window: number): FramesSize {
  const windows = frames - window + 1;
  const features = frameLength * window;
  return {
    frames,
    frameLength,
    window,
    windows,
    features,
    windowBytes: FLOAT32_BYTES * features,
    covariance: covarianceOf(features),
    gram: gramOf(windows),
  };
}

/**
 * The option `--frames`: "count/length/window", or a .npy or Parquet file with `--window` beside it.
 *
 * throws  TrainError 'options' where it is neither, or a window longer than the recording; 'file' or 'history' as the file says
 */
export async function readFrames(asked: string, window: number | undefined): Promise<FramesSize> {
  const numbers = /^(\d+)\/(\d+)(?:\/(\d+))?$/.exec(asked);
  if (numbers === null && statSync(asked, { throwIfNoEntry: false }) === undefined) {
    throw new TrainError(
      'options',
      `--frames: expected count/length/window such as 90000/76800/50, or a .npy or Parquet file, got "${asked}"; check the path`,
    );
  }
  if (numbers?.[3] !== undefined && window !== undefined)
    throw new TrainError(
      'options',
      '--window: expected no window in --frames beside it, got both; leave one of them out',
    );
  const shape = numbers === null ? await fileShape(asked) : { count: Number(numbers[1]), length: Number(numbers[2]) };
  const taken = numbers?.[3] === undefined ? (window ?? 1) : Number(numbers[3]);
  if (taken < 1 || taken > shape.count || shape.length < 1) {
    throw new TrainError(
      'options',
      `--frames: expected a window of 1 to ${shape.count} frames of at least one number, got a window of ${taken} and ${shape.length} numbers a frame`,
    );
  }
  return framesSize(shape.count, shape.length, taken);
}

async function fileShape(path: string): Promise<{ count: number; length: number }> {
  const { openFrames } = await import('../wide/open-frames.ts');
  const { count, frameLength } = await openFrames(path);
  if (count === null)
    throw new TrainError(
      'history',
      `${path}: expected a recording that says how many frames it has, got one that does not`,
    );
  return { count, length: frameLength };
}
