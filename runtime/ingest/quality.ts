/** Whether a number can be a reading of its signal at all. Physical limits only: the filter judges what is merely unlikely. */
import type { RefusedCause } from '../health.ts';

/** Null for a usable reading, otherwise the cause to count. */
export function refusedBecause(value: number, range: readonly [number, number] | null): RefusedCause | null {
  if (!Number.isFinite(value)) return 'value';
  if (range === null) return null;
  if (value < range[0]) return 'below-range';
  return value > range[1] ? 'above-range' : null;
}
