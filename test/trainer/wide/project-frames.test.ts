/** Frames laid down and gone over again: every window once, none over a break, times kept. */
import { readdirSync } from 'node:fs';
import { describe, expect, test } from 'vitest';
import type { FrameSource } from '../../../trainer/wide/frames.ts';
import { joinRecordings, projectFrames } from '../../../trainer/wide/project-frames.ts';
import type { ProjectedFrames } from '../../../trainer/wide/projected-frames.ts';
import { testFolder } from '../../support/folder.ts';

/** Frames (t, −t) counted on from `first`, in chunks of 3 at most. */
function source(first: number, count: number, startMs: number | null, over: Partial<FrameSource> = {}): FrameSource {
  return {
    name: `part-${first}`,
    frameLength: 2,
    count,
    startMs,
    tickMs: 10,
    async *chunks() {
      for (let at = 0; at < count; at += 3) {
        const now = Math.min(3, count - at);
        const values = Float32Array.from({ length: 6 }, (_, k) => (first + at + (k >> 1)) * (k % 2 === 0 ? 1 : -1));
        yield { count: now, values };
      }
    },
    ...over,
  };
}

async function laid(sources: FrameSource[], folder = testFolder()): Promise<ProjectedFrames> {
  const choice = { frameLength: 2, numbers: 2, seed: 1 };
  return await projectFrames(joinRecordings(sources), choice, folder, () => {});
}

function windows(frames: ProjectedFrames, span: number, from: number, to: number, stride = 1): number[][] {
  const seen: number[][] = [];
  frames.visit(span, from, to, (row, first) => void seen.push([first, ...row.filter((_, k) => k % 2 === 0)]), stride);
  return seen;
}

describe('frames laid down', () => {
  test('are visited window by window, in order', async () => {
    const frames = await laid([source(0, 7, 1000)]);
    expect(windows(frames, 3, 0, 7).map(([first]) => first)).toEqual([0, 1, 2, 3, 4]);
    expect(windows(frames, 3, 2, 6)).toEqual([
      [2, 2, 3, 4],
      [3, 3, 4, 5],
    ]);
    expect(windows(frames, 2, 1, 7, 2)).toEqual([
      [1, 1, 2],
      [3, 3, 4],
      [5, 5, 6],
    ]);
    frames.standardise(Float64Array.of(1, 0), 2);
    expect(windows(frames, 1, 6, 7)).toEqual([[6, 2.5]]);
    frames.close();
  });

  test('of several files follow on where their times do, and no window reaches over a break', async () => {
    const on = await laid([source(0, 4, 1000), source(4, 3, 1040)]);
    expect(on.stretches).toEqual([{ from: 0, to: 7, startMs: 1000 }]);
    on.close();
    const untold = await laid([source(0, 4, 1000), source(4, 3, null)]);
    expect(untold.stretches).toHaveLength(1);
    untold.close();
    const broken = await laid([source(0, 4, 1000), source(4, 3, 5000)]);
    expect(broken.stretches).toEqual([
      { from: 0, to: 4, startMs: 1000 },
      { from: 4, to: 7, startMs: 5000 },
    ]);
    expect(windows(broken, 3, 0, 7).map(([first]) => first)).toEqual([0, 1, 4]);
    expect([broken.timeOf(3), broken.timeOf(4), broken.timeOf(6)]).toEqual([1030, 5000, 5020]);
    broken.close();
  });

  test('of a long recording come in pieces without a seam', async () => {
    const count = 140_000; // more than is read at once
    const frames = await laid([source(0, count, 0)]);
    const span = 5;
    let next = 0;
    frames.visit(span, 0, count, (row, first) => {
      if (first !== next || row[0] !== first || row[2 * span - 2] !== first + span - 1)
        throw new Error(`window ${next} is that of ${first}, from ${row[0]} to ${row[2 * span - 2]}`);
      next++;
    });
    expect(next).toBe(count - span + 1);
    frames.close();
  });

  test('leave no file, neither when they are closed nor while they are used', async () => {
    const folder = testFolder();
    const frames = await laid([source(0, 700, 0)], folder);
    expect(readdirSync(folder)).toEqual([]);
    frames.close();
  });
});

describe('refusals', () => {
  test.each([
    ['no start', [source(0, 2, null)], 'does not say when its first frame was taken; add --start'],
    ['no tick', [source(0, 2, 0, { tickMs: null })], 'add --tick'],
    ['another length', [source(0, 2, 0), source(2, 2, null, { frameLength: 3 })], 'expected frames of 2 numbers'],
    ['another tick', [source(0, 2, 0), source(2, 2, null, { tickMs: 20 })], 'expected a frame every 10 ms'],
    [
      'files out of order',
      [source(0, 4, 1000), source(4, 3, 500)],
      'expected a first frame after 1970-01-01T00:00:01.030Z',
    ],
  ])('%s', async (_, sources, message) => {
    await expect(laid(sources)).rejects.toThrow(message);
  });
});
