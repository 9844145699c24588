/**
 * A process of its own for "one hour of the thermal camera, windows of 50 frames", so that its memory is its own: what the
 * command `condense` does with a recording, on frames that are generated as they are read, since an hour of them would take
 * 14 GB of disk. Prints one JSON object. With a second word: another count of frames.
 */
import { mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import {
  condenseSkill,
  type FrameChunk,
  joinRecordings,
  learnCondenser,
  parts,
  projectFrames,
  scoreCondenser,
  stateSeries,
} from '@stillwell/trainer';
import { CAMERA, PIXELS, thermalCamera } from './thermal-camera.ts';

const SEED = 11;
const IN_A_CHUNK = 10;
const NUMBERS = 256;
const WINDOW = 50;
const HORIZON = 25;
const RANK = 32;
const MOST_STATES = 8;

async function* chunks(frames: number): AsyncGenerator<FrameChunk> {
  const camera = thermalCamera(SEED);
  const values = new Float32Array(IN_A_CHUNK * PIXELS);
  for (let frame = 0; frame < frames; frame += IN_A_CHUNK) {
    const count = Math.min(IN_A_CHUNK, frames - frame);
    for (let k = 0; k < count; k++) camera.next(values.subarray(k * PIXELS, (k + 1) * PIXELS));
    yield { count, values };
  }
}

/** Seconds that generating alone takes, from a tenth of the frames. */
async function generatingSeconds(frames: number): Promise<number> {
  const started = performance.now();
  for await (const { count } of chunks(Math.ceil(frames / 10))) void count;
  return ((performance.now() - started) / 1000) * 10;
}

async function main(): Promise<void> {
  const frames = Number(process.argv[2] ?? 3600 * CAMERA.framesPerSecond);
  const folder = mkdtempSync(join(tmpdir(), 'wide-camera-'));
  const nothing = (): void => {};
  const started = performance.now();
  const since = (): number => (performance.now() - started) / 1000;
  try {
    const source = { name: 'camera', frameLength: PIXELS, count: frames, startMs: 0, tickMs: CAMERA.tickMs };
    const recording = joinRecordings([{ ...source, chunks: () => chunks(frames) }]);
    const shape = {
      ...{ frameLength: PIXELS, tickMs: CAMERA.tickMs, numbers: NUMBERS, seed: 1 },
      ...{ window: WINDOW, horizon: HORIZON, features: 0 },
    };
    const projected = await projectFrames(recording, shape, folder, nothing);
    const read = since();
    const learned = { shape, source: 'camera', rank: RANK, order: null, mostStates: MOST_STATES, progress: nothing };
    const condenser = learnCondenser(projected, learned);
    const rows = stateSeries(condenser, projected, 1000, nothing).timesMs.length;
    const score = scoreCondenser(condenser, projected, parts(frames).choose, frames);
    projected.close();
    const seconds = since();
    const { order, discarded, energy, orthogonality } = condenser.record;
    const generating = await generatingSeconds(frames);
    process.stdout.write(
      `${JSON.stringify({ seconds, read, generating, rows, order, discarded: discarded / energy, orthogonality, skill: condenseSkill(score) })}\n`,
    );
  } finally {
    rmSync(folder, { recursive: true });
  }
}

await main();
