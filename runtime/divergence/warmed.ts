/** Filters made from the recent ticks: one that takes over, and one that stands where another stood before it failed. */
import type { RecentTicks } from '../ingest/recent.ts';
import type { Journal } from '../residuals/journal.ts';
import { type CheckedBundle, Serving } from '../serving.ts';

/** As many ticks are forecast from as bounds need to settle: paths cost most of a tick, and meanwhile nothing else runs. */
const RECENT_FORECASTS = 1024;

/**
 * A new filter of a bundle that has taken in the recent ticks before `next`; fresh where they do not reach up to it.
 *
 * throws  whatever the bundle's filter throws
 */
export function warmed(checked: CheckedBundle, recent: RecentTicks, next: number | null): Serving {
  const serving = new Serving(checked);
  const { horizon, warmupTicks } = checked.model;
  let quiet = recent.count - warmupTicks - Math.max(RECENT_FORECASTS, 8 * horizon);
  recent.forEach((tick, values) => {
    if (next !== null && tick >= next) return;
    if (quiet-- > 0) serving.fold(tick, values);
    else serving.step(tick, values);
  });
  return serving.tick < 0 || serving.tick + 1 === next ? serving : new Serving(checked);
}

/** The filter as it stood before tick `next`, from the start of the open segment; null where that cannot be had. */
export function rebuilt(
  { checked, coarseness }: Serving,
  { startState, ticks }: Journal,
  recent: RecentTicks,
  next: number,
): Serving | null {
  const serving = new Serving(checked);
  try {
    serving.restore(startState, serving.savedBounds());
    serving.coarsen(coarseness);
    recent.forEach((tick, values) => {
      if (tick >= next - ticks && tick < next) serving.fold(tick, values);
    });
    return ticks === 0 || serving.tick === next - 1 ? serving : null;
  } catch {
    return null;
  }
}
