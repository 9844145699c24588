/**
 * Fits a fleet: hands sites to workers, the largest first, writes what comes back, and lets no site's trouble stop another.
 * Only this thread writes, each site's files all or none, so an interrupt leaves finished sites whole and the others as they were.
 */
import { writeOutputs } from '../output-file.ts';
import type { FleetProgress } from './fleet-progress.ts';
import { type FleetPool, startPool } from './pool.ts';
import type { SiteFacts } from './site-facts.ts';
import type { FleetOutcome, FleetTask } from './worker.ts';

/** A site to be fitted, or one that was refused before. */
export interface FleetWork {
  readonly label: string;
  /** null: `problem` says why not. */
  readonly task: FleetTask | null;
  readonly problem: string | null;
  /** How long it takes beside the others, in any unit. */
  readonly weight: number;
}

/** What came of one site. */
export type FleetResult = { readonly label: string } & (
  | { readonly facts: SiteFacts; readonly isUnchanged: boolean; readonly problem: null }
  | { readonly facts: null; readonly problem: string }
);

/** How to run. */
export interface FleetRun {
  readonly threads: number;
  readonly progress: FleetProgress;
  /** Aborted by an interrupt. */
  readonly signal: AbortSignal;
  /** As PoolShape. */
  readonly heapMb?: number;
  readonly workerFile?: URL;
}

/** Results in the order of `works`; `isStopped` where an interrupt left sites undone, which then have none. */
export interface FleetRan {
  readonly results: readonly (FleetResult | null)[];
  readonly isStopped: boolean;
}

/** Runs them all. */
export async function runFleet(works: readonly FleetWork[], run: FleetRun): Promise<FleetRan> {
  const results = works.map(({ label, problem }): FleetResult | null =>
    problem === null ? null : { label, facts: null, problem },
  );
  const waiting = works
    .map((work, index) => ({ work, index }))
    .filter(({ work }) => work.task !== null)
    .sort((a, b) => b.work.weight - a.work.weight || a.index - b.index);
  for (const { label, weight, task } of works) if (task === null) run.progress.done(label, weight, true);
  if (waiting.length === 0) return { results, isStopped: false };
  const label = (index: number): string => (works[index] as FleetWork).label;
  const pool = startPool(
    { threads: Math.min(run.threads, waiting.length), heapMb: run.heapMb, workerFile: run.workerFile },
    ({ index, step }) => run.progress.step(label(index), step),
  );
  const stop = (): void => void pool.stop();
  run.signal.addEventListener('abort', stop, { once: true });
  const lane = async (): Promise<void> => {
    for (let next = waiting.shift(); next !== undefined && !run.signal.aborted; next = waiting.shift()) {
      const { work, index } = next;
      const outcome = await pool.run({ ...(work.task as FleetTask), index });
      if (run.signal.aborted) return;
      results[index] = settle(work.label, outcome);
      run.progress.done(work.label, work.weight, outcome.kind !== 'fitted');
    }
  };
  try {
    await Promise.all(Array.from({ length: run.threads }, lane));
  } finally {
    run.signal.removeEventListener('abort', stop);
    await endPool(pool, run.signal);
  }
  return { results, isStopped: results.includes(null) };
}

async function endPool(pool: FleetPool, signal: AbortSignal): Promise<void> {
  if (!signal.aborted) await pool.stop();
}

/** Writes what a worker made. A full disk is this site's trouble, as any other. */
function settle(label: string, outcome: FleetOutcome): FleetResult {
  if (outcome.kind === 'failed') return { label, facts: null, problem: outcome.problem };
  if (outcome.kind === 'unchanged') return { label, facts: outcome.facts, isUnchanged: true, problem: null };
  try {
    writeOutputs(outcome.files);
  } catch (error) {
    return { label, facts: null, problem: (error as Error).message };
  }
  return { label, facts: outcome.facts, isUnchanged: false, problem: null };
}
