/** Recordings of frames as files: NumPy's format 1.0 (numpy.lib.format), written by hand. */
import { writeFileSync } from 'node:fs';

/** Writes float32 frames. */
export function writeNpy(path: string, frames: Float32Array, frameLength: number): string {
  const dictionary = `{'descr': '<f4', 'fortran_order': False, 'shape': (${frames.length / frameLength}, ${frameLength}), }`;
  const padded = `${dictionary.padEnd(64 * Math.ceil((dictionary.length + 11) / 64) - 11)}\n`;
  const head = Buffer.alloc(10);
  head.write('\x93NUMPY\x01\x00', 'latin1');
  head.writeUInt16LE(padded.length, 8);
  writeFileSync(
    path,
    Buffer.concat([head, Buffer.from(padded, 'latin1'), Buffer.from(frames.buffer, 0, frames.byteLength)]),
  );
  return path;
}
