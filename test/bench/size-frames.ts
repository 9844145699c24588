/** Frames for sizing: a few slow waves over a line of points and noise, as a .npy file; and what condensing them holds. */
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { uniforms } from './known-plant.ts';
import { measure, STILLWELL } from './training-process.ts';

const FRAMES = 6000;
const POINTS = 2000;
/** Frames in a window, beside the 16 that are the default. */
const WINDOW = 50;

/** Peak of `stillwell condense` in bytes, foreseen and as it came. */
export async function condensePeak(): Promise<{ readonly foreseen: number; readonly came: number }> {
  const folder = mkdtempSync(join(tmpdir(), 'stillwell-size-'));
  try {
    const file = join(folder, 'frames.npy');
    writeFileSync(file, framesFile());
    const said = await measure([STILLWELL, 'size', '--frames', file, '--window', String(WINDOW), '--json']);
    const { condense } = JSON.parse(said.stdout) as { condense: { peakBytes: number } };
    const words = ['--frames', file, '--start', '2026-01-01T00:00:00Z', '--tick', '1000', '--window', String(WINDOW)];
    const ran = await measure([STILLWELL, 'condense', ...words, '--out', join(folder, 'out')]);
    return { foreseen: condense.peakBytes, came: 1e6 * ran.peakMb };
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
}

/** Layout as numpy.lib.format 1.0 has it. */
function framesFile(): Uint8Array {
  const text = `{'descr': '<f4', 'fortran_order': False, 'shape': (${FRAMES}, ${POINTS}), }`.padEnd(117);
  const head = Buffer.concat([Buffer.from('\x93NUMPY\x01\x00\x76\x00', 'latin1'), Buffer.from(`${text}\n`)]);
  const numbers = new Float32Array(FRAMES * POINTS);
  const next = uniforms(5);
  for (let t = 0; t < FRAMES; t++)
    for (let k = 0; k < POINTS; k++) {
      const waves = Math.sin(t / 20 + k / 300) + 0.7 * Math.cos(t / 33) * Math.sin(k / 90);
      numbers[t * POINTS + k] = waves + 0.2 * (next() - 0.5);
    }
  return Buffer.concat([head, Buffer.from(numbers.buffer)]);
}
