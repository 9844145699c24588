/**
 * Frames of a recording as few numbers each, laid down in a file of their own so that they can be gone over several times in
 * the memory of a few windows, while the recording itself, which may be a thousand times larger, is read once. The file
 * stands beside the results and has no name while it is used: it is gone with the process, however that ends.
 */
import { closeSync, openSync, readSync, rmSync, statfsSync } from 'node:fs';
import { join } from 'node:path';
import { writeFully } from '@stillwell/runtime/files';
import { TrainError } from '../errors.ts';
import { unwritable } from '../output-file.ts';
import { bytesText } from '../text-table.ts';

/** Frames written at once. */
const WRITE_FRAMES = 256;
/** Numbers held while windows are gone over, beside one window. */
const READ_NUMBERS = 1 << 18;

/** Frames that follow one another without a break; indices over all of them. */
export interface Stretch {
  readonly from: number;
  readonly to: number;
  readonly startMs: number;
}

/** A window as it is visited; the row is used again for the next. */
export type VisitWindow = (row: Float64Array, first: number) => void;

/** See the file's head. */
export class ProjectedFrames {
  readonly numbers: number;
  readonly tickMs: number;
  readonly #descriptor: number;
  readonly #out: Float32Array;
  #waiting = 0;
  #count = 0;
  readonly #stretches: { from: number; to: number; startMs: number }[] = [];
  #mean: Float64Array;
  #scale = 1;

  /** Opens the file in `folder`, which must exist; `expected` frames, where known, must find room on its disk. */
  constructor(folder: string, numbers: number, tickMs: number, expected: number | null) {
    this.numbers = numbers;
    this.tickMs = tickMs;
    this.#out = new Float32Array(WRITE_FRAMES * numbers);
    this.#mean = new Float64Array(numbers);
    const path = join(folder, `.frames.${process.pid}.part`);
    try {
      requireRoom(folder, 4 * numbers * (expected ?? 0));
      this.#descriptor = openSync(path, 'w+', 0o600);
      rmSync(path);
    } catch (cause) {
      throw cause instanceof TrainError ? cause : unwritable(path, cause as Error);
    }
  }

  /** Frames so far. */
  get count(): number {
    return this.#count;
  }

  get stretches(): readonly Stretch[] {
    return this.#stretches;
  }

  /** Frames added from here on do not follow on those before. */
  begin(startMs: number): void {
    this.#stretches.push({ from: this.#count, to: this.#count, startMs });
  }

  /** Adds one frame's numbers. */
  add(frame: Float32Array): void {
    this.#out.set(frame, this.#waiting * this.numbers);
    this.#waiting++;
    this.#count++;
    (this.#stretches[this.#stretches.length - 1] as { to: number }).to = this.#count;
    if (this.#waiting === WRITE_FRAMES) this.flush();
  }

  /** Writes what waits. */
  flush(): void {
    const bytes = new Uint8Array(this.#out.buffer, 0, 4 * this.#waiting * this.numbers);
    try {
      writeFully(this.#descriptor, bytes);
    } catch (cause) {
      throw unwritable('the projected frames', cause as Error);
    }
    this.#waiting = 0;
  }

  /** From now on frames are read less this mean and divided by this scale. */
  standardise(mean: Float64Array, scale: number): void {
    this.#mean = mean;
    this.#scale = scale;
  }

  /** Time of a frame. */
  timeOf(index: number): number {
    const stretch = this.#stretches.find(({ to }) => index < to) ?? (this.#stretches.at(-1) as Stretch);
    return stretch.startMs + (index - stretch.from) * this.tickMs;
  }

  /**
   * Visits every run of `span` frames that follow one another, whose first frame is in [from, to − span], in order; the row
   * is (span × numbers), the oldest frame first.
   */
  visit(span: number, from: number, to: number, visit: VisitWindow, stride = 1): void {
    const held = span + Math.max(1, Math.floor(READ_NUMBERS / this.numbers));
    const values = new Float64Array(held * this.numbers);
    for (const stretch of this.#stretches) {
      const last = Math.min(stretch.to, to) - span;
      let first = Math.max(stretch.from, from);
      // Origins lie on the stride from `from`, whatever the stretches.
      first = from + Math.ceil((first - from) / stride) * stride;
      while (first <= last) {
        const read = Math.min(held, Math.min(stretch.to, to) - first);
        this.#read(first, read, values);
        for (let at = first; at + span <= first + read; at += stride) {
          const start = (at - first) * this.numbers;
          visit(values.subarray(start, start + span * this.numbers), at);
        }
        const visited = Math.floor((read - span) / stride) + 1;
        first += visited * stride;
      }
    }
  }

  close(): void {
    closeSync(this.#descriptor);
  }

  #read(from: number, count: number, to: Float64Array): void {
    const raw = new Float32Array(count * this.numbers);
    const bytes = new Uint8Array(raw.buffer);
    const start = 4 * from * this.numbers;
    for (let at = 0; at < bytes.length; ) {
      const got = readSync(this.#descriptor, bytes, at, bytes.length - at, start + at);
      if (got === 0) throw new TrainError('file', 'the projected frames ended early; the disk lost what was written');
      at += got;
    }
    for (let i = 0, at = 0; i < count; i++) {
      for (let j = 0; j < this.numbers; j++, at++) to[at] = (raw[at] - this.#mean[j]) / this.#scale;
    }
  }
}

function requireRoom(folder: string, bytes: number): void {
  const { bavail, bsize } = statfsSync(folder);
  if (bytes > bavail * bsize)
    throw new TrainError(
      'file',
      `${folder}: expected ${bytesText(bytes)} of free disk for the projected frames, got ${bytesText(bavail * bsize)}; ` +
        'give another --out, or a smaller --projection',
    );
}
