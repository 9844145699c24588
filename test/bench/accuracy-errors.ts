/** How forecasts from many origins are scored: the same for ours, for peers and for rivals. */
import type { DataCase } from './datasets.ts';

/** What is needed of a case to score forecasts of it. */
export type Scored = Pick<DataCase, 'signals' | 'values' | 'horizon'>;

/**
 * Mean squared error by signal and step, each signal's divided by the square of its `scales`; readings that are missing are no
 * targets.
 *
 * shapes  ahead (origins × signals × horizon); result (signals × horizon)
 */
export function errorCells(
  { signals, values, horizon }: Scored,
  origins: readonly number[],
  ahead: Float64Array,
  scales: readonly number[],
): Float64Array {
  const width = signals.length * horizon;
  const cells = new Float64Array(width);
  for (let i = 0; i < signals.length; i++) {
    for (let h = 1; h <= horizon; h++) {
      let sum = 0;
      let count = 0;
      origins.forEach((origin, n) => {
        const miss = ahead[n * width + i * horizon + h - 1]! - values[i]![origin + h]!;
        if (Number.isNaN(miss)) return;
        sum += miss * miss;
        count++;
      });
      cells[i * horizon + h - 1] = sum / count / scales[i]! ** 2;
    }
  }
  return cells;
}

/** Standard deviations of the signals over the first ticks. */
export function learnScales({ signals, values }: Scored, learnTicks: number): number[] {
  return signals.map((_, i) => {
    const seen = values[i]!.subarray(0, learnTicks).filter((value) => !Number.isNaN(value));
    const mean = meanOf(seen);
    return Math.sqrt(meanOf(seen.map((value) => (value - mean) ** 2)));
  });
}

export function meanOf(values: ArrayLike<number>): number {
  let sum = 0;
  for (let k = 0; k < values.length; k++) sum += values[k]!;
  return sum / values.length;
}

export function geometricMean(ratios: readonly number[]): number {
  return Math.exp(meanOf(ratios.map(Math.log)));
}
