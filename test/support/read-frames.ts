/** All frames of a source, as plain numbers. */
import type { FrameSource } from '../../trainer/wide/frames.ts';

/** Reads it to its end. */
export async function readFrames(source: FrameSource): Promise<number[][]> {
  const frames: number[][] = [];
  for await (const { count, values } of source.chunks())
    for (let k = 0; k < count; k++)
      frames.push([...values.subarray(k * source.frameLength, (k + 1) * source.frameLength)]);
  return frames;
}
