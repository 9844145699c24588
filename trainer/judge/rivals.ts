/**
 * The obvious forecasts that a model must beat to be worth its trouble. They see what the model sees: readings up to the
 * origin, a missing one replaced by the last before it. What they learn, they learn from the learning part alone.
 */
import type { TickSpan } from '../span.ts';
import { fitWindowRidge } from './window-ridge.ts';

/** One rival; forecasts are in the units of the series it was made from. */
export interface Rival {
  readonly name: string;
  /** Fills steps 1..out.length of a signal, from origin `at` (index into the series). */
  forecast(signal: number, at: number, out: Float64Array): void;
}

/** What the rivals stand on. */
export interface RivalInput {
  /** (ny) of (ticks), complete: the last reading carried forward. */
  readonly carried: readonly Float64Array[];
  /** The same without excluded time: what rivals learn from. */
  readonly taught: readonly Float64Array[];
  readonly horizon: number;
  /** Ticks in the period; 0: none. */
  readonly periodTicks: number;
  /** Indices of the learning part; null where the series does not hold it. */
  readonly learn: TickSpan | null;
}

/**
 * All rivals that can be made: the last value; the value one period ago; the last value plus the mean change of the
 * learning part; a ridge regression on the signal's own last readings.
 *
 * source  persistence, seasonal persistence and drift: Hyndman & Athanasopoulos, Forecasting: Principles and Practice,
 *         3rd ed. (2021), section 5.2
 */
export function makeRivals(input: RivalInput): Rival[] {
  const rivals = [persistence(input)];
  if (input.periodTicks > 0) rivals.push(seasonal(input));
  if (input.learn !== null) {
    rivals.push(drift(input, input.learn));
    const ridge = windowRidge(input, input.learn);
    if (ridge !== null) rivals.push(ridge);
  }
  return rivals;
}

/**
 * A copy with every missing reading replaced by the last before it; before the first, by `start`.
 */
export function carryForward(y: Float64Array, start: number): Float64Array {
  let last = start;
  return y.map((value) => {
    if (Number.isFinite(value)) last = value;
    return last;
  });
}

function persistence({ carried }: RivalInput): Rival {
  return {
    name: 'persistence',
    forecast(signal, at, out) {
      out.fill(carried[signal][at]);
    },
  };
}

function seasonal({ carried, periodTicks }: RivalInput): Rival {
  return {
    name: 'seasonal persistence',
    forecast(signal, at, out) {
      const y = carried[signal];
      for (let h = 1; h <= out.length; h++) {
        const from = at + h - periodTicks * Math.ceil(h / periodTicks);
        out[h - 1] = y[Math.max(0, from)];
      }
    },
  };
}

function drift({ carried, taught }: RivalInput, learn: TickSpan): Rival {
  const slopes = taught.map((y) => {
    const ticks = learn.toTick - learn.fromTick;
    return ticks > 1 ? (y[learn.toTick - 1] - y[learn.fromTick]) / (ticks - 1) : 0;
  });
  return {
    name: 'drift',
    forecast(signal, at, out) {
      for (let h = 1; h <= out.length; h++) out[h - 1] = carried[signal][at] + h * slopes[signal];
    },
  };
}

function windowRidge(input: RivalInput, learn: TickSpan): Rival | null {
  const { carried, taught, horizon, periodTicks } = input;
  const maps = taught.map((y) => fitWindowRidge(y.subarray(learn.fromTick, learn.toTick), horizon, periodTicks));
  if (maps.some((map) => map === null)) return null;
  return {
    name: 'window ridge',
    forecast(signal, at, out) {
      const y = carried[signal];
      const map = maps[signal];
      if (map === null) return;
      const lags = map.lags;
      out.fill(y[at]);
      for (let k = 1; k <= lags; k++) {
        const away = y[Math.max(0, at - k)] - y[at];
        if (away === 0) continue;
        const row = (k - 1) * horizon;
        for (let h = 0; h < out.length; h++) out[h] += away * map.weights[row + h];
      }
    },
  };
}
