/** Foreseen memory of the sites of a fleet, so that no more run together than the memory holds. */
import { statSync } from 'node:fs';
import { ProtocolError } from '@stillwell/protocol';
import { TrainError } from '../errors.ts';
import type { FitSiteJob } from '../fit-site.ts';
import { BYTES } from './constants.ts';
import { fitShape, memoryWork, priced } from './fit-work.ts';
import { historyExtent } from './history-extent.ts';

/** Bytes of a site's history as stored; 0 where a file is missing. */
export function storedBytes(history: readonly string[]): number {
  return history.reduce((sum, path) => sum + (statSync(path, { throwIfNoEntry: false })?.size ?? 0), 0);
}

/**
 * Peak of each job. Only the `most` with the largest files are looked into, since no more than those run together at the
 * worst moment; of the others it is enough that they are no larger.
 */
export async function fleetPeaks(jobs: readonly FitSiteJob[], most: number): Promise<number[]> {
  const sizes = jobs.map(({ history }) => storedBytes(history));
  const largest = sizes
    .map((_, k) => k)
    .sort((a, b) => (sizes[b] as number) - (sizes[a] as number))
    .slice(0, most);
  const peaks = jobs.map(() => 0);
  for (const k of largest) peaks[k] = await peakOf(jobs[k] as FitSiteJob);
  const least = Math.min(...largest.map((k) => peaks[k] as number));
  return peaks.map((peak) => (peak === 0 ? least : peak));
}

/** One that cannot be read takes next to nothing: its fit says why. */
async function peakOf({ site, history, zone, span, options }: FitSiteJob): Promise<number> {
  try {
    const extent = await historyExtent(history, site, zone ?? site.timeZone, span);
    return priced(memoryWork(fitShape(site, extent, options)), BYTES);
  } catch (error) {
    if (error instanceof TrainError || error instanceof ProtocolError) return BYTES.program as number;
    throw error;
  }
}
