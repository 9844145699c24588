/** A fit foreseen, and then run by the real command in a process of its own. */
import { mkdtempSync, rmSync, statSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { logName, type SizeShape, writeSizePlant } from './size-plant.ts';
import { measure, STILLWELL } from './training-process.ts';

/** What `stillwell size --json` says, as far as it is held against something. */
export interface Foreseen {
  readonly probe_seconds: number;
  readonly fit: {
    readonly shape: Parameters<typeof import('@stillwell/trainer').timeWork>[0];
    readonly peakBytes: number;
    readonly seconds: number;
    readonly bundleBytes: number;
    readonly factorsBytes: number | null;
  };
}

/** What it said, and what came. */
export interface SizeRun {
  readonly shape: SizeShape;
  readonly foreseen: Foreseen;
  readonly seconds: number;
  readonly peakBytes: number;
  readonly bundleBytes: number;
  /** Null where none were written. */
  readonly factorsBytes: number | null;
}

/** Runs one shape; time (by the clock or of the processor, whichever is less) and memory are the least of `repeats` runs. */
export async function runShape(shape: SizeShape, repeats: number): Promise<SizeRun> {
  const folder = mkdtempSync(join(tmpdir(), 'stillwell-size-'));
  try {
    await writeSizePlant(folder, shape);
    const files = ['--site', join(folder, 'site.yaml'), '--history', join(folder, logName(shape))];
    const out = join(folder, 'out');
    const sized = await measure([STILLWELL, 'size', ...files, '--json']);
    const foreseen = JSON.parse(sized.stdout) as Foreseen;
    let seconds = Number.POSITIVE_INFINITY;
    let peakMb = Number.POSITIVE_INFINITY;
    for (let k = 0; k < repeats; k++) {
      const ran = await measure([STILLWELL, 'fit', ...files, '--out', out, '--json']);
      // Other programs lengthen the one, threads that help along the other; on a quiet machine they are close.
      seconds = Math.min(seconds, ran.seconds, ran.cpuSeconds);
      peakMb = Math.min(peakMb, ran.peakMb);
    }
    const bundleBytes = statSync(join(out, 'candidate.swc')).size;
    const factors = statSync(join(out, 'factors.swf'), { throwIfNoEntry: false });
    return { shape, foreseen, seconds, peakBytes: 1e6 * peakMb, bundleBytes, factorsBytes: factors?.size ?? null };
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
}
