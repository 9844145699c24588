/** Lines and areas of a chart as path data, from points in ticks and units. */
import type { PathPoint } from './plant.ts';
import { type ValueScale, valueScale } from './scale.ts';

/** Room inside a chart, and what it shows. */
export interface Frame {
  readonly left: number;
  readonly right: number;
  readonly top: number;
  readonly bottom: number;
  readonly fromTick: number;
  readonly toTick: number;
  readonly values: ValueScale;
}

/** Where a tick stands. */
export function xOf(frame: Frame, tick: number): number {
  const share = (tick - frame.fromTick) / (frame.toTick - frame.fromTick);
  return round(frame.left + share * (frame.right - frame.left));
}

/** Where a value stands. */
export function yOf(frame: Frame, value: number): number {
  const { low, high } = frame.values;
  return round(frame.bottom - ((value - low) / (high - low)) * (frame.bottom - frame.top));
}

/** The tick at a place. */
export function tickAt(frame: Frame, x: number): number {
  return frame.fromTick + ((x - frame.left) / (frame.right - frame.left)) * (frame.toTick - frame.fromTick);
}

/** Readings joined where they follow closely, and dots where they stand alone. */
export function readingsPath(frame: Frame, ticks: readonly number[], values: readonly (number | null)[]): string {
  const bridged = longestBridge(ticks, values);
  let path = '';
  let before = Number.NEGATIVE_INFINITY;
  let isAlone = false;
  ticks.forEach((tick, k) => {
    const value = values[k] ?? null;
    if (value === null || tick < frame.fromTick) return;
    const isJoined = tick - before <= bridged;
    // A line of no length with round ends is a dot.
    if (!isJoined && isAlone) path += 'h0';
    path += `${isJoined ? 'L' : 'M'}${xOf(frame, tick)} ${yOf(frame, value)}`;
    isAlone = !isJoined;
    before = tick;
  });
  return isAlone ? `${path}h0` : path;
}

/** Ticks over which readings are joined: thrice their usual distance, so that a signal read every fifth tick is a line too. */
function longestBridge(ticks: readonly number[], values: readonly (number | null)[]): number {
  const distances: number[] = [];
  let before = Number.NaN;
  ticks.forEach((tick, k) => {
    if ((values[k] ?? null) === null) return;
    if (!Number.isNaN(before)) distances.push(tick - before);
    before = tick;
  });
  distances.sort((a, b) => a - b);
  return 3 * (distances[distances.length >> 1] ?? 1);
}

/** A line through medians. */
export function medianPath(frame: Frame, points: readonly PathPoint[]): string {
  return points
    .map(({ tick, median }, k) => `${k === 0 ? 'M' : 'L'}${xOf(frame, tick)} ${yOf(frame, median)}`)
    .join('');
}

/** The area between bounds. */
export function bandPath(frame: Frame, points: readonly PathPoint[]): string {
  if (points.length === 0) return '';
  const upper = points.map(({ tick, upper: y }, k) => `${k === 0 ? 'M' : 'L'}${xOf(frame, tick)} ${yOf(frame, y)}`);
  const lower = points.toReversed().map(({ tick, lower: y }) => `L${xOf(frame, tick)} ${yOf(frame, y)}`);
  return `${upper.join('')}${lower.join('')}Z`;
}

/** A long path thinned to what a screen can show; its last point stays. */
export function thinned(points: readonly PathPoint[], most: number): readonly PathPoint[] {
  const stride = Math.ceil(points.length / most);
  return stride <= 1 ? points : points.filter((_, k) => k % stride === 0 || k === points.length - 1);
}

/** A range that holds readings, bounds, and those limits that do not squeeze the rest. least  smallest range shown */
export function rangeOf(
  values: readonly (number | null)[],
  paths: readonly (readonly PathPoint[])[],
  limits: readonly number[],
  least: number,
): ValueScale {
  let low = Number.POSITIVE_INFINITY;
  let high = Number.NEGATIVE_INFINITY;
  const hold = (value: number): void => {
    if (value < low) low = value;
    if (value > high) high = value;
  };
  for (const value of values) if (value !== null) hold(value);
  for (const path of paths)
    for (const { lower, upper } of path) {
      hold(lower);
      hold(upper);
    }
  if (low > high) return valueScale(0, 1, 1);
  const room = Math.max(high - low, least) / 2;
  const near = limits.filter((limit) => limit >= low - room && limit <= high + room);
  for (const limit of near) hold(limit);
  const margin = Math.max(high - low, least) * 0.06;
  return valueScale(low - margin, high + margin, least);
}

function round(place: number): number {
  return Math.round(place * 10) / 10;
}
