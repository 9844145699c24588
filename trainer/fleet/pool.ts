/**
 * Worker threads for a fleet, kept by a library (piscina): it queues, starts a new worker where one died, and ends them
 * all on demand. A worker that dies fails the one site it had.
 */
import { Piscina } from 'piscina';
import { compiledFile } from '../compiled-file.ts';
import type { FleetNote, FleetOutcome, FleetTask } from './worker.ts';

/** The workers of one run. */
export interface FleetPool {
  run(task: FleetTask): Promise<FleetOutcome>;
  /** Stops everything at once; tasks under way end as failed. */
  stop(): Promise<void>;
}

/** How to start it. */
export interface PoolShape {
  readonly threads: number;
  /** Largest heap of a worker, in MB, so that one gone wild dies alone; the engine's own limit when absent. */
  readonly heapMb?: number | undefined;
  /** Another worker, for tests of workers that die. */
  readonly workerFile?: URL | undefined;
}

/**
 * Starts a pool.
 *
 * onNote  told what a worker begins to do
 */
export function startPool(
  { threads, heapMb, workerFile: file = compiledFile('fleet/worker.js') }: PoolShape,
  onNote: (note: FleetNote) => void,
): FleetPool {
  const pool = new Piscina<FleetTask, FleetOutcome>({
    filename: file.href,
    minThreads: threads,
    maxThreads: threads,
    recordTiming: false,
    ...(heapMb === undefined ? {} : { resourceLimits: { maxOldGenerationSizeMb: heapMb } }),
  });
  pool.on('message', (note: FleetNote) => onNote(note));
  // A worker that dies between tasks took no site with it; without a listener it would end the program.
  pool.on('error', () => {});
  return {
    run: (task) =>
      pool.run(task).catch((error: unknown): FleetOutcome => ({ kind: 'failed', problem: deathOf(error as Error) })),
    stop: () => pool.destroy(),
  };
}

function deathOf(error: Error & { code?: string }): string {
  if (error.code === 'ERR_WORKER_OUT_OF_MEMORY')
    return 'its worker ran out of memory; fit it alone, or with a longer tick';
  return `its worker ended early (${error.message}); fit it alone to see why`;
}
