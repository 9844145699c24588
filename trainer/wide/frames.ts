/**
 * Where frames come from: cameras, spectra, bins of vibration. A frame is one vector of numbers at one tick; frames come in
 * chunks, so that a recording never has to fit in memory.
 */

/** A run of frames, one after the other. */
export interface FrameChunk {
  /** How many frames. */
  readonly count: number;
  /** The first (count × frameLength) numbers, row-major; the source may use it again for its next chunk. */
  readonly values: Float32Array;
}

/** A recording that can be read from its beginning, as often as wanted. */
export interface FrameSource {
  /** Where it is, for messages. */
  readonly name: string;
  /** Numbers in a frame. */
  readonly frameLength: number;
  /** Frames in all; null where only reading will tell. */
  readonly count: number | null;
  /** Time of the first frame, milliseconds since 1970 UTC; null where the recording does not say. */
  readonly startMs: number | null;
  /** Milliseconds from frame to frame; null where the recording does not say. */
  readonly tickMs: number | null;
  /** Reads from the beginning. */
  chunks(): AsyncIterable<FrameChunk>;
}

/** When frames were taken, told by a person where the recording does not say. */
export interface FrameTimes {
  readonly startMs?: number;
  readonly tickMs?: number;
}
