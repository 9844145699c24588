/**
 * The readings of one channel laid on ticks: implausible ones left out, one value a tick by the signal's aggregate, on its
 * lattice. Ticks may be laid in several runs, one after the other: then the tick value carries counters across.
 */
import { latticeIndex, latticeValue, type Signal, wrapOf } from '@stillwell/protocol';
import { TickValue } from './aggregate.ts';
import type { ChannelReadings } from './history.ts';
import type { Plausible } from './plausible.ts';
import type { Lattice } from './resolution.ts';

/** Which ticks channels are laid on. */
export class LaidSpan {
  readonly tickMs: number;
  readonly first: number;
  readonly ticks: number;
  #times: Float64Array | null = null;
  #places = new Int32Array(0);

  constructor(tickMs: number, first: number, ticks: number) {
    this.tickMs = tickMs;
    this.first = first;
    this.ticks = ticks;
  }

  /** Index of each time's tick, -1 outside; kept, since channels of one file share their times. */
  placesOf(times: Float64Array): Int32Array {
    if (times === this.#times) return this.#places;
    const { tickMs, first, ticks } = this;
    const places = new Int32Array(times.length);
    for (let i = 0; i < places.length; i++) {
      const k = Math.floor((times[i] as number) / tickMs) - first;
      places[i] = k >= 0 && k < ticks ? k : -1;
    }
    this.#times = times;
    this.#places = places;
    return places;
  }
}

/**
 * Tells rows that a logger wrote twice: the same value at the same time. In sums they would count twice, and a counter
 * that went on in between would seem to have been reset.
 */
class RepeatFilter {
  #time = Number.NaN;
  readonly #values: number[] = [];

  /** Times must not fall. */
  isRepeat(time: number, value: number): boolean {
    if (time !== this.#time) this.#values.length = 0;
    this.#time = time;
    if (this.#values.includes(value)) return true;
    this.#values.push(value);
    return false;
  }
}

/**
 * Lays one channel.
 *
 * lattice  null: values stay as the aggregate gives them
 * order    positions in order of time; null where they lie so already
 * untilMs  from here on only a declared range bounds what is taken
 * tick     carries counters from the run of ticks before
 */
export function layChannel(
  channel: ChannelReadings,
  signal: Signal,
  lattice: Lattice | null,
  order: Uint32Array | null,
  span: LaidSpan,
  plausible: Plausible,
  untilMs: number,
  tick: TickValue = new TickValue(signal.aggregate, wrapOf(signal)),
): Float64Array {
  const laid = new Float64Array(span.ticks).fill(Number.NaN);
  if (signal.aggregate === 'last') {
    layLast(channel, lattice, order, span, plausible, untilMs, laid);
    return laid;
  }
  const furthest = lattice === null ? Number.MAX_VALUE : Number.MAX_SAFE_INTEGER * lattice.step;
  const isTaken = (value: number, timeMs: number): boolean =>
    timeMs < untilMs || plausible.isDeclared
      ? value >= plausible.low && value <= plausible.high
      : Math.abs(value) <= furthest;
  const repeats = signal.aggregate === 'sum' || signal.aggregate === 'increment' ? new RepeatFilter() : null;
  let open = -1;
  const close = (): void => {
    const value = tick.close();
    if (!Number.isNaN(value))
      laid[open] =
        lattice === null
          ? value
          : latticeValue(latticeIndex(value, lattice.step, lattice.offset), lattice.step, lattice.offset);
  };
  for (let n = 0; n < channel.times.length; n++) {
    const i = order === null ? n : (order[n] as number);
    const value = channel.values[i] as number;
    if (!isTaken(value, channel.times[i] as number)) continue;
    if (repeats?.isRepeat(channel.times[i] as number, value)) continue;
    const k = Math.floor((channel.times[i] as number) / span.tickMs) - span.first;
    if (k !== open) {
      if (open >= 0) close();
      open = k;
    }
    tick.add(k + span.first, value);
  }
  if (open >= 0) close();
  return laid;
}

/** The same where a tick takes its last reading, as nearly all signals do: then nothing is carried from reading to reading. */
function layLast(
  { times, values }: ChannelReadings,
  lattice: Lattice | null,
  order: Uint32Array | null,
  span: LaidSpan,
  { low, high, isDeclared }: Plausible,
  untilMs: number,
  laid: Float64Array,
): void {
  const furthest = lattice === null ? Number.MAX_VALUE : Number.MAX_SAFE_INTEGER * lattice.step;
  const isBounded = isDeclared || untilMs === Number.POSITIVE_INFINITY;
  const places = span.placesOf(times);
  for (let n = 0; n < places.length; n++) {
    const i = order === null ? n : (order[n] as number);
    const value = values[i] as number;
    const isTaken =
      isBounded || (times[i] as number) < untilMs ? value >= low && value <= high : Math.abs(value) <= furthest;
    if (!isTaken) continue;
    const k = places[i] as number;
    if (k >= 0) laid[k] = value;
  }
  if (lattice === null) return;
  const { step, offset } = lattice;
  for (let k = 0; k < laid.length; k++) {
    const value = laid[k] as number;
    if (!Number.isNaN(value)) laid[k] = latticeValue(latticeIndex(value, step, offset), step, offset);
  }
}
