/**
 * Frames from a NumPy array file, one along its first axis: read in pieces of a few megabytes, so that a recording of any
 * length takes the same memory.
 */
import { type FileHandle, open } from 'node:fs/promises';
import { refusal, unreadable } from '../history/refusal.ts';
import { checkFinite } from './finite-frames.ts';
import type { FrameChunk, FrameSource, FrameTimes } from './frames.ts';
import { HEADER_READ, type NpyHeader, readNpyHeader } from './npy-header.ts';
import { inspectRecording, RECORDING } from './recording-file.ts';

/** Bytes of numbers in a chunk; at least one frame. */
const CHUNK_BYTES = 4 << 20;

/**
 * Opens a recording; TrainError 'file' where it cannot be read, 'history' where it is none, is cut short or holds what is no
 * number.
 */
export async function openNpyFrames(path: string, times: FrameTimes = {}): Promise<FrameSource> {
  const { bytes: size } = inspectRecording(path);
  return await withFile(path, async (file) => {
    const start = Buffer.alloc(HEADER_READ);
    const { bytesRead } = await file.read(start, 0, HEADER_READ, 0);
    const header = readNpyHeader(path, start.subarray(0, bytesRead));
    const [count, ...rest] = header.shape;
    const frameLength = rest.reduce((product, size) => product * size, 1);
    if (rest.length === 0 || frameLength === 0 || count === 0)
      throw refusal(
        { file: path },
        'frames along the first of two axes or more',
        `an array of shape (${header.shape.join(', ')})`,
        'save an array of shape (frames, numbers)',
      );
    const expected = header.dataAt + count * frameLength * header.type.bytes;
    if (size !== expected)
      throw refusal(
        { file: path },
        `${expected} bytes, as its shape says`,
        `${size}`,
        size < expected
          ? 'it was cut short: fetch it again'
          : 'more was written behind the array: save one array a file',
      );
    return {
      name: path,
      frameLength,
      count,
      startMs: times.startMs ?? null,
      tickMs: times.tickMs ?? null,
      chunks: () => readChunks(path, header, count, frameLength),
    };
  });
}

async function* readChunks(
  path: string,
  { dataAt, type }: NpyHeader,
  count: number,
  frameLength: number,
): AsyncGenerator<FrameChunk> {
  const most = Math.max(1, Math.floor(CHUNK_BYTES / (frameLength * type.bytes)));
  const bytes = Buffer.from(new ArrayBuffer(most * frameLength * type.bytes));
  const values = new Float32Array(most * frameLength);
  const file = await opened(path);
  try {
    for (let frame = 0; frame < count; frame += most) {
      const now = Math.min(most, count - frame);
      const numbers = now * frameLength;
      await readWhole(path, file, bytes, numbers * type.bytes, dataAt + frame * frameLength * type.bytes);
      const read = type.view(bytes.buffer as ArrayBuffer, numbers);
      if (typeof read[0] === 'bigint') for (let k = 0; k < numbers; k++) values[k] = Number(read[k]);
      else values.set(read as ArrayLike<number>);
      if (type.isFloat) checkFinite(path, values, numbers, frameLength, frame);
      yield { count: now, values };
    }
  } finally {
    await file.close();
  }
}

async function readWhole(path: string, file: FileHandle, into: Buffer, length: number, from: number): Promise<void> {
  for (let at = 0; at < length; ) {
    const { bytesRead } = await file.read(into, at, length - at, from + at);
    if (bytesRead === 0)
      throw refusal({ file: path }, 'a file that stays as it was opened', 'its end', 'read it when it is complete');
    at += bytesRead;
  }
}

async function opened(path: string): Promise<FileHandle> {
  try {
    return await open(path, 'r');
  } catch (cause) {
    throw unreadable(path, RECORDING, cause);
  }
}

async function withFile<T>(path: string, work: (file: FileHandle) => Promise<T>): Promise<T> {
  const file = await opened(path);
  try {
    return await work(file);
  } finally {
    await file.close();
  }
}
