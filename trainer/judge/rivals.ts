/**
 * The obvious forecasts that a model must beat to be worth its trouble. They see what the model sees: readings up to the
 * origin, a missing one replaced by the last before it. What they learn, they learn from the learning part alone.
 */
import type { TickSpan } from '../span.ts';
import { fitWindowRidge, forecastWindow } from './window-ridge.ts';

const DAY_MS = 86_400_000;
const CALENDAR = [
  ['daily persistence', DAY_MS],
  ['weekly persistence', 7 * DAY_MS],
] as const;
const PERIODS_HELD = 3;

/** Rivals that anyone would guess; the gate asks for skill over these. The window ridge is reported beside them. */
export const SIMPLE_RIVALS: readonly string[] = [
  'persistence',
  'seasonal persistence',
  'daily persistence',
  'weekly persistence',
  'drift',
];

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
  /** Ticks in the period found in the learning part; 0: none. */
  readonly periodTicks: number;
  readonly tickMs: number;
  /** Ticks before the first origin: a rival that repeats a day or a week needs some of them. */
  readonly knownTicks: number;
  /** Indices of the learning part; null where the series does not hold it. */
  readonly learn: TickSpan | null;
}

/**
 * All rivals that can be made: the last value; the value one period ago, one day and one week ago; the last value plus the mean change of the
 * learning part; a ridge regression on the signal's own last readings.
 *
 * source  persistence, seasonal persistence and drift: Hyndman & Athanasopoulos, Forecasting: Principles and Practice,
 *         3rd ed. (2021), section 5.2
 */
export function makeRivals(input: RivalInput): Rival[] {
  const rivals = [persistence(input)];
  for (const [name, ticks] of periodsOf(input)) rivals.push(seasonal(input, name, ticks));
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
  const out = new Float64Array(y.length);
  let last = start;
  for (let t = 0; t < y.length; t++) {
    if (Number.isFinite(y[t])) last = y[t];
    out[t] = last;
  }
  return out;
}

function persistence({ carried }: RivalInput): Rival {
  return {
    name: 'persistence',
    forecast(signal, at, out) {
      out.fill(carried[signal][at]);
    },
  };
}

/** The period found, and the calendar's that are not that one and of which the past holds at least three. */
function periodsOf({ periodTicks, tickMs, knownTicks }: RivalInput): (readonly [string, number])[] {
  const calendar = CALENDAR.flatMap(([name, ms]): (readonly [string, number])[] => {
    const ticks = ms / tickMs;
    const isHeld = Number.isInteger(ticks) && ticks > 1 && PERIODS_HELD * ticks <= knownTicks;
    return isHeld && ticks !== periodTicks ? [[name, ticks]] : [];
  });
  return periodTicks > 0 ? [['seasonal persistence', periodTicks], ...calendar] : calendar;
}

function seasonal({ carried }: RivalInput, name: string, periodTicks: number): Rival {
  return {
    name,
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
      forecastWindow(map, horizon, y, at, out);
    },
  };
}
