import { expect, it } from 'vitest';
import { chooseThreads } from '../../../trainer/fleet/threads.ts';

const GB = 1e9;

it.each([
  // peaks, cores, free, asked → count, because
  [[0.2, 0.2, 0.2, 0.2], 2, 16, null, 2, 'cores'],
  [[0.2], 8, 16, null, 1, 'sites'],
  [[0.2, 0.2, 0.2, 0.2], 8, 16, 3, 3, 'asked'],
  // 0.7 × 2 GB = 1.4 GB: the two largest take 1.3, a third would make 1.5.
  [[0.2, 0.9, 0.4, 0.2], 4, 2, null, 2, 'memory'],
  // Not even one fits: it is tried all the same.
  [[9], 4, 2, null, 1, 'sites'],
  [[9, 9], 4, 2, null, 1, 'memory'],
  [[], 4, 2, null, 1, 'cores'],
] as const)('%j GB on %i cores and %i GB, asked %s: %i by %s', (peaks, cores, free, asked, count, because) => {
  const machine = { cores, freeBytes: free * GB };
  const bytes = peaks.map((peak) => peak * GB);
  expect(chooseThreads(bytes, machine, asked)).toEqual({ count, because });
});

it('refuses to be asked for more than the memory holds, and says how many it does hold', () => {
  const machine = { cores: 8, freeBytes: 2 * GB };
  expect(() => chooseThreads([0.6 * GB, 0.6 * GB, 0.6 * GB], machine, 3)).toThrow(
    /--threads: expected at most 2, which is what 2000 MB of free memory hold, got 3/,
  );
});
