/**
 * Which readings can be believed at all: those inside the site file's range; without one, those within a hundred times
 * the usual spread of the signal. A single 1e12 from a broken converter would otherwise decide every scale.
 */
import type { Signal } from '@stillwell/protocol';
import { quantiles } from './order-statistics.ts';

const FEWEST = 100;
const USUAL = [0.005, 0.995];
const TIMES_SPREAD = 100;
const TIMES_LEVEL = 1e6;

/** Inclusive bounds, and whether a person declared them. */
export interface Plausible {
  readonly low: number;
  readonly high: number;
  readonly isDeclared: boolean;
}

const ALL: Plausible = { low: Number.NEGATIVE_INFINITY, high: Number.POSITIVE_INFINITY, isDeclared: false };

/** Bounds for a signal's readings; NaN among them is passed over. */
export function plausibleSpan(signal: Signal, values: Float64Array): Plausible {
  if (signal.range !== null) return { low: signal.range[0], high: signal.range[1], isDeclared: true };
  if (values.length < FEWEST) return ALL;
  const [low, high] = quantiles(values, USUAL) as [number, number];
  if (Number.isNaN(low)) return ALL;
  const margin = high > low ? TIMES_SPREAD * (high - low) : TIMES_LEVEL * Math.max(1, Math.abs(low));
  return { low: low - margin, high: high + margin, isDeclared: false };
}
