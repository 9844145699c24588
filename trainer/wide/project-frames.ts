/** Recordings read once, each frame projected and laid down; several files follow on where their times do. */
import { TrainError } from '../errors.ts';
import type { FeatureMap } from './feature-map.ts';
import type { FrameSource } from './frames.ts';
import { ProjectedFrames } from './projected-frames.ts';
import { createProjection } from './projection.ts';

/** Frames no longer than this many numbers are taken as they are, longer ones projected to it, where nothing is asked. */
export const DEFAULT_NUMBERS = 256;

/** How frames become few numbers. */
export interface ProjectionChoice {
  readonly frameLength: number;
  readonly numbers: number;
  readonly seed: number;
}

/** What the recordings are together: one length and one tick for all, times for the first. */
export interface Recording {
  readonly sources: readonly FrameSource[];
  readonly name: string;
  readonly frameLength: number;
  readonly tickMs: number;
  readonly startMs: number;
  /** Null where only reading will tell. */
  readonly count: number | null;
}

/**
 * Checks that recordings belong together.
 *
 * throws  TrainError 'history' naming the file, what was expected and got; 'options' where times are missing
 */
export function joinRecordings(sources: readonly FrameSource[]): Recording {
  const first = sources[0];
  if (first.startMs === null) throw untold(first.name, 'when its first frame was taken', '--start');
  if (first.tickMs === null) throw untold(first.name, 'how far apart its frames are', '--tick');
  for (const source of sources) {
    if (source.frameLength !== first.frameLength)
      throw odd(source, `frames of ${first.frameLength} numbers, as ${first.name} has`, `${source.frameLength}`);
    if (source.tickMs !== null && Math.abs(source.tickMs / first.tickMs - 1) > 0.01)
      throw odd(source, `a frame every ${first.tickMs} ms, as ${first.name} has`, `one every ${source.tickMs} ms`);
  }
  const counts = sources.map(({ count }) => count);
  return {
    sources,
    name: sources.map(({ name }) => name).join(', '),
    frameLength: first.frameLength,
    tickMs: first.tickMs,
    startMs: first.startMs,
    count: counts.includes(null) ? null : counts.reduce((sum: number, count) => sum + (count ?? 0), 0),
  };
}

/**
 * Reads and projects all frames into a file in `folder`, which must exist. The caller closes what it gets.
 *
 * throws  TrainError of the sources, 'file' where the disk refuses, 'history' where a recording begins before the last ended
 */
export async function projectFrames(
  recording: Recording,
  choice: ProjectionChoice,
  folder: string,
  progress: (done: number, total: number | null) => void,
): Promise<ProjectedFrames> {
  const { frameLength, tickMs } = recording;
  const project = projectionOf(choice);
  const out = new ProjectedFrames(folder, choice.numbers, tickMs, recording.count);
  const numbers = new Float32Array(choice.numbers);
  try {
    for (const source of recording.sources) {
      beginSource(out, source, recording);
      for await (const { count, values } of source.chunks()) {
        for (let i = 0; i < count; i++) {
          const frame = values.subarray(i * frameLength, (i + 1) * frameLength);
          if (project === null) numbers.set(frame);
          else project.apply(frame, numbers);
          out.add(numbers);
        }
        progress(out.count, recording.count);
      }
    }
    out.flush();
    return out;
  } catch (cause) {
    out.close();
    throw cause;
  }
}

/** The projection; null where frames are taken as they are. */
function projectionOf({ frameLength, numbers, seed }: ProjectionChoice): FeatureMap | null {
  return numbers === frameLength ? null : createProjection({ inputs: frameLength, outputs: numbers, seed });
}

/** Times of a recording that say nothing else follow on. */
function beginSource(out: ProjectedFrames, source: FrameSource, { startMs, tickMs, sources }: Recording): void {
  if (out.count === 0) {
    out.begin(startMs);
    return;
  }
  const expected = out.timeOf(out.count - 1) + tickMs;
  // A start given for all is that of the first.
  const given = source.startMs !== null && source.startMs !== sources[0].startMs ? source.startMs : expected;
  if (Math.abs(given - expected) <= 0.5 * tickMs) return;
  if (given < expected)
    throw odd(source, `a first frame after ${time(expected - tickMs)}, where the last file ended`, time(given));
  out.begin(given);
}

function time(ms: number): string {
  return new Date(Math.round(ms)).toISOString();
}

function untold(name: string, what: string, option: string): TrainError {
  return new TrainError('options', `${name} does not say ${what}; add ${option}`);
}

function odd(source: FrameSource, expected: string, got: string): TrainError {
  return new TrainError(
    'history',
    `${source.name}: expected ${expected}, got ${got}; give recordings of one sensor, in order`,
  );
}
