/** Where the lines of a chart's grid stand, for values and for times. */

/** A range that a grid fits. */
export interface ValueScale {
  readonly low: number;
  readonly high: number;
  readonly lines: readonly number[];
  readonly decimals: number;
}

/** Fewer lines than these tell too little of the range. */
const FEWEST_LINES = 3;

/** A round grid of three lines or some more; 1, 2 or 5 times a power of ten apart. least  smallest range shown */
export function valueScale(low: number, high: number, least: number): ValueScale {
  const middle = (low + high) / 2;
  const range = Math.max(high - low, least, Math.abs(middle) * 1e-9, 1e-9);
  const from = Math.min(low, middle - range / 2);
  const to = Math.max(high, middle + range / 2);
  const power = Math.floor(Math.log10(to - from));
  for (const step of [5, 2, 1, 0.5, 0.2].map((factor) => Number(`${factor}e${power}`))) {
    const first = Math.ceil(from / step - 1e-9);
    const last = Math.floor(to / step + 1e-9);
    if (last - first + 1 < FEWEST_LINES && step > Number(`0.2e${power}`)) continue;
    const lines = Array.from({ length: last - first + 1 }, (_, k) => (first + k) * step);
    return { low: from, high: to, lines, decimals: Math.max(0, -Math.floor(Math.log10(step) + 1e-9)) };
  }
  return { low: from, high: to, lines: [], decimals: 0 };
}

const SECOND = 1000;
const MINUTE = 60 * SECOND;
const HOUR = 60 * MINUTE;
const DAY = 24 * HOUR;
const TIME_STEPS = [
  ...[1, 2, 5, 10, 15, 30].map((n) => n * SECOND),
  ...[1, 2, 5, 10, 15, 30].map((n) => n * MINUTE),
  ...[1, 2, 3, 6, 12].map((n) => n * HOUR),
  ...[1, 2, 7, 14, 28].map((n) => n * DAY),
];

/** A grid in time. */
export interface TimeScale {
  readonly stepMs: number;
  readonly lines: readonly number[];
}

/** At most `most` round moments, round by the clock that is `offsetMs` ahead of UTC. */
export function timeScale(fromMs: number, toMs: number, most: number, offsetMs: number): TimeScale {
  const raw = (toMs - fromMs) / Math.max(1, most);
  const stepMs = TIME_STEPS.find((step) => step >= raw) ?? Math.ceil(raw / (28 * DAY)) * 28 * DAY;
  const lines: number[] = [];
  for (let k = Math.ceil((fromMs + offsetMs) / stepMs); k * stepMs - offsetMs <= toMs; k++)
    lines.push(k * stepMs - offsetMs);
  return { stepMs, lines };
}
