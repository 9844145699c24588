/** How large the factors of a site will be. */
import type { Site } from '@stillwell/protocol';
import { nearReach, THIN } from '../factors/far-lags.ts';
import { isAffordable } from '../factors/keeper.ts';
import { gridOf } from '../factors/moments.ts';
import { sumLengths } from '../factors/run-sums.ts';
import { shapeOf } from '../factors/site-shape.ts';
import { WILD_STATE } from '../factors/wild.ts';

const NUMBER_BYTES = 8;
/** Of the envelope and of the head that names the site and its channels. */
const HEAD_BYTES = 800;
const HEAD_BYTES_A_CHANNEL = 24;

/**
 * Bytes of the file, of a history of so many ticks without long gaps; each long gap of late adds what a run's end takes. Null
 * where the site has so many channels that it goes without.
 */
export function factorsBytes(site: Site, ticks: number): number | null {
  if (!isAffordable(site)) return null;
  const shape = shapeOf(site, null);
  const channels = shape.names.length;
  const places = gridOf(shape).lags.length;
  const sums = Object.values(sumLengths(channels, places, shape.longestHorizon));
  const end = 1 + channels * (2 + places);
  const near = nearReach(shape.reach);
  const thinned = near < shape.reach ? Math.min(Math.floor(shape.reach / THIN), Math.floor(ticks / THIN)) : 0;
  const open = channels * (2 + Math.min(near, Math.max(0, ticks - 1)) + thinned);
  const waiting = 1 + 3 * channels + shape.signalCount * WILD_STATE;
  const numbers = channels + sums.reduce((sum, length) => sum + length, 0) + end + open + waiting;
  return HEAD_BYTES + HEAD_BYTES_A_CHANNEL * channels + NUMBER_BYTES * numbers;
}
