/**
 * The record while no bundle serves: the last value stands for the forecast, and a sensor's step is found as its readings
 * come. A reading finer than the step known so far is kept as it came (64 bits); once a channel has had a few, the segment
 * ends and the next one has the finer step. So a stray value with many digits costs ten bytes and not the lattice, and no
 * reading is ever rounded, but for what was computed from several (means, sums) and for steps that the site file declares:
 * these are rounded as under a bundle.
 */
import {
  bundleSchemaHash,
  decodePlainState,
  encodePlainState,
  type Layout,
  latticeIndex,
  latticeValue,
  layoutOf,
  MAX_INDEX,
  type PlainState,
  type Site,
  schemaHash,
} from '@stillwell/protocol';
import { decimalsOf, isOnStep, STEPS } from './decimals.ts';
import type { Recorded } from './recorded.ts';

/** The readings that fell into a tick, by channel; undefined where none are known. */
export type TickReadingsOf = (channel: number) => readonly number[] | undefined;

const NO_BUNDLE = new Uint8Array(32);
const NOTHING = new Uint8Array(0);
/** So many readings finer than a channel's step in one segment end it … */
const FINER_READINGS = 8;
/** … and the new step is the one that this share of them needs: the rest may be strays. */
const FINER_SHARE = 0.75;

/** See the file head. */
export class PlainRecord implements Recorded {
  readonly layout: Layout;
  tick: number;
  readonly signalCount: number;
  readonly lattice: Float64Array;
  readonly predicted: Float64Array;
  readonly raw: Float64Array;
  readonly #last: Float64Array;
  /** (nc) 1 where the step is to be found. */
  readonly #isOpen: Uint8Array;
  /** (nc × decimals) readings of this segment that need more decimals than the step has. */
  readonly #finer: Uint16Array;
  #isRefinable = false;

  /** isDeclared  (nc) whether the site file says the step */
  constructor({ layout, tick, last }: PlainState, isDeclared: readonly boolean[]) {
    const count = layout.channels.length;
    this.layout = layout;
    this.tick = tick;
    this.signalCount = layout.channels.filter(({ role }) => role === 'signal').length;
    this.#last = last.slice();
    this.lattice = new Float64Array(count).fill(Number.NaN);
    this.predicted = new Float64Array(count).fill(Number.NaN);
    this.raw = new Float64Array(count).fill(Number.NaN);
    this.#isOpen = Uint8Array.from(isDeclared, (declared) => (declared ? 0 : 1));
    this.#finer = new Uint16Array(count * STEPS.length);
  }

  /** The record of a site before anything was read. */
  static of(site: Site): PlainRecord {
    const steps = channelsOf(site).map(({ resolution }) => resolution ?? 1);
    const last = new Float64Array(steps.length).fill(Number.NaN);
    return new PlainRecord({ layout: layoutOf(site, steps), tick: -1, last }, declaredOf(site));
  }

  /** The record that a saved state belongs to. throws  ProtocolError where the bytes are none */
  static restored(state: Uint8Array, site: Site): PlainRecord {
    const saved = decodePlainState(state);
    const resolutions = channelsOf(site).map(({ resolution }) => resolution);
    // Under a step that was not declared as it is now, readings are kept as they came until `declared`.
    return new PlainRecord(
      saved,
      saved.layout.channels.map(({ lattice }, c) => resolutions[c] === lattice.step),
    );
  }

  get channelCount(): number {
    return this.lattice.length;
  }

  get digest(): Uint8Array {
    return NO_BUNDLE;
  }

  /** Forgets what the segment before showed of finer steps. */
  beginSegment(): void {
    this.#finer.fill(0);
    this.#isRefinable = false;
  }

  /** Takes one tick in. `values` (nc) in units; `readings` what they were made of, which says whether they are exact. */
  step(tick: number, values: Float64Array, readings: TickReadingsOf): void {
    for (let c = 0; c < values.length; c++) {
      const value = values[c]!;
      const isOff = this.#isOpen[c] === 1 && !Number.isNaN(value) && this.#countFiner(c, readings(c) ?? [value]);
      const index = isOff ? Number.NaN : this.indexOf(c, value);
      this.predicted[c] = this.#last[c]!;
      this.lattice[c] = Math.abs(index) <= MAX_INDEX ? index : Number.NaN;
      this.raw[c] = Number.isNaN(this.lattice[c]) ? value : Number.NaN;
      if (!Number.isNaN(this.lattice[c])) this.#last[c] = this.lattice[c]!;
    }
    this.tick = tick;
  }

  indexOf(channel: number, value: number): number {
    const { step, offset } = this.layout.channels[channel]!.lattice;
    return latticeIndex(value, step, offset);
  }

  /** The same record with finer steps where this segment has shown that they pay; itself where none do. */
  refined(): PlainRecord {
    if (!this.#isRefinable) return this;
    return this.#withSteps((c) => this.#stepFor(c));
  }

  /** Whether the segment should end for `refined`. */
  get isRefinable(): boolean {
    return this.#isRefinable;
  }

  /** Before the first tick of a segment: channels that were never on their lattice take the step of what just came. */
  begun(readings: TickReadingsOf): PlainRecord {
    return this.#withSteps((c) => {
      const { step } = this.layout.channels[c]!.lattice;
      if (this.#isOpen[c] === 0 || !Number.isNaN(this.#last[c])) return step;
      const decimals = (readings(c) ?? []).map(decimalsOf);
      return Math.min(step, STEPS[Math.max(0, ...decimals)]!);
    });
  }

  /** The same record with the step that the readings of a late change need; itself where they lie on the lattice, or on none. */
  reaching(channel: number, readings: readonly number[]): PlainRecord {
    const step = this.#step(channel);
    if (this.#isOpen[channel] === 0 || readings.every((reading) => isOnStep(reading, step))) return this;
    const finest = Math.min(step, ...readings.map((reading) => STEPS[decimalsOf(reading)] ?? step));
    return this.#withSteps((c) => (c === channel ? finest : this.#step(c)));
  }

  /** The same record behind an outage: nothing is remembered but the steps. */
  afresh(): PlainRecord {
    const last = new Float64Array(this.channelCount).fill(Number.NaN);
    return new PlainRecord(
      { layout: this.layout, tick: -1, last },
      [...this.#isOpen].map((isOpen) => isOpen === 0),
    );
  }

  /** The same record with the steps that the site file declares by now; itself where it has them. */
  declared(site: Site): PlainRecord {
    const channels = channelsOf(site);
    const changed = this.#withSteps((c) => channels[c]!.resolution ?? this.#step(c));
    if (changed === this) return this;
    return new PlainRecord({ layout: changed.layout, tick: changed.tick, last: changed.#last }, declaredOf(site));
  }

  get model(): null {
    return null;
  }

  coarsen(): void {}

  /** Nothing is known of the size of a residual. */
  residualScaleSteps(): Float64Array {
    return new Float64Array(this.channelCount).fill(Number.NaN);
  }

  savedState(): Uint8Array {
    return encodePlainState({ layout: this.layout, tick: this.tick, last: this.#last });
  }

  savedBounds(): Uint8Array {
    return NOTHING;
  }

  #step(channel: number): number {
    return this.layout.channels[channel]!.lattice.step;
  }

  /** Whether a value made of these readings would lose something on the lattice; counts what they need. */
  #countFiner(channel: number, readings: readonly number[]): boolean {
    const step = this.#step(channel);
    let isFiner = false;
    for (const reading of readings) {
      if (isOnStep(reading, step)) continue;
      const decimals = decimalsOf(reading);
      // Of a 32-bit float the step may be right although its digits go on.
      if (decimals >= 0 && STEPS[decimals]! >= step) continue;
      isFiner = true;
      if (decimals >= 0) this.#count(channel, decimals);
    }
    return isFiner;
  }

  #count(channel: number, decimals: number): void {
    const at = channel * STEPS.length;
    if (this.#finer[at + decimals]! < 65_535) this.#finer[at + decimals]!++;
    let sum = 0;
    for (let d = 0; d < STEPS.length; d++) sum += this.#finer[at + d]!;
    if (sum >= FINER_READINGS) this.#isRefinable = true;
  }

  #stepFor(channel: number): number {
    const counts = this.#finer.subarray(channel * STEPS.length, (channel + 1) * STEPS.length);
    const all = counts.reduce((sum, count) => sum + count, 0);
    if (all < FINER_READINGS) return this.#step(channel);
    let decimals = 0;
    for (let sum = counts[0]!; sum < FINER_SHARE * all; sum += counts[decimals]!) decimals++;
    return Math.min(this.#step(channel), STEPS[decimals]!);
  }

  #withSteps(stepOf: (channel: number) => number): PlainRecord {
    const { tickMs, channels } = this.layout;
    const last = this.#last.slice();
    const changed = channels.map((channel, c) => {
      const step = stepOf(c);
      if (step === channel.lattice.step) return channel;
      if (!Number.isNaN(last[c])) last[c] = onStep(last[c]!, channel.lattice.step, step);
      return { ...channel, lattice: { step, offset: 0 } };
    });
    if (changed.every((channel, c) => channel === channels[c])) return this;
    const layout = { tickMs, channels: changed };
    return new PlainRecord(
      { layout, tick: this.tick, last },
      [...this.#isOpen].map((isOpen) => isOpen === 0),
    );
  }
}

/** Whether a layout is that of a site, whatever its steps. */
export function isLayoutOf(layout: Layout, site: Site): boolean {
  return Buffer.compare(bundleSchemaHash(layout), schemaHash(site)) === 0;
}

function channelsOf(site: Site) {
  return [...site.signals, ...site.inputs];
}

function declaredOf(site: Site): readonly boolean[] {
  return channelsOf(site).map(({ resolution }) => resolution !== null);
}

/** An index on another lattice; NaN where it would lie beyond every index. */
function onStep(index: number, from: number, to: number): number {
  const moved = latticeIndex(latticeValue(index, from, 0), to, 0);
  return Math.abs(moved) <= MAX_INDEX ? moved : Number.NaN;
}
