/** Opens a recording of frames by the ending of its file. */
import { TrainError } from '../errors.ts';
import { refusal } from '../history/refusal.ts';
import type { FrameSource, FrameTimes } from './frames.ts';
import { openNpyFrames } from './npy-frames.ts';
import { openParquetFrames } from './parquet-frames.ts';

/** TrainError 'file' or 'history' where it is none that can be read. */
export async function openFrames(path: string, times: FrameTimes = {}): Promise<FrameSource> {
  if (path === '') throw new TrainError('file', '--frames: expected a path, got an empty one');
  if (/\.npy$/i.test(path)) return await openNpyFrames(path, times);
  if (/\.(parquet|pq)$/i.test(path)) return await openParquetFrames(path, times);
  throw refusal({ file: path }, 'a recording in .npy or .parquet', 'another ending', 'save frames as one of these');
}
