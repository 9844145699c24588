/** How many sites are fitted at the same time: as many as cores, as sites, and as memory holds. */
import { TrainError } from '../errors.ts';

/** Share of the memory that is free which the fits may take; the rest is for what was not foreseen. */
const MEMORY_SHARE = 0.7;

/** What the machine has. */
export interface Machine {
  readonly cores: number;
  /** Bytes that may be taken without hardship. */
  readonly freeBytes: number;
}

/** How many, and why no more. */
export interface Threads {
  readonly count: number;
  readonly because: 'asked' | 'cores' | 'sites' | 'memory';
}

/**
 * Chooses. At the worst moment the largest sites run together, so the largest ones together must fit; one always runs.
 *
 * peakBytes  foreseen peak of each site
 * asked      `--threads`; null: as many as there are cores
 * throws     TrainError 'options' where more was asked for than the memory holds
 */
export function chooseThreads(peakBytes: readonly number[], machine: Machine, asked: number | null): Threads {
  const sorted = [...peakBytes].sort((a, b) => b - a);
  const budget = MEMORY_SHARE * machine.freeBytes;
  const most = Math.max(1, Math.min(asked ?? machine.cores, sorted.length));
  let sum = 0;
  let held = 0;
  while (held < most && sum + (sorted[held] as number) <= budget) sum += sorted[held++] as number;
  if (asked !== null && held < most && most > 1) {
    throw new TrainError(
      'options',
      `--threads: expected at most ${Math.max(1, held)}, which is what ${Math.round(machine.freeBytes / 1e6)} MB of free memory hold, got ${asked}; ask for fewer, or leave the option out`,
    );
  }
  const count = Math.max(1, held);
  if (count < most) return { count, because: 'memory' };
  if (count === sorted.length && count < (asked ?? machine.cores)) return { count, because: 'sites' };
  return { count, because: asked === null ? 'cores' : 'asked' };
}
