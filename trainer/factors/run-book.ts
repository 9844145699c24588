/**
 * Keeps the books of runs: lagged products, level sums, heads and ends, of one run after another as its ticks come. What is
 * in is weighted as of the newest tick; time that passes makes all of it lighter. A run as short as the longest horizon
 * teaches nothing and leaves no trace.
 */
import type { OpenRun, RunEnd, RunSums } from './factors.ts';
import { FarLags, nearReach, nearSpread, type RunRows } from './far-lags.ts';
import type { LagGrid } from './lag-grid.ts';
import { LagSums, longestTransform } from './lag-sums.ts';
import type { Carrier } from './open-state.ts';
import {
  addHeads,
  addLevels,
  type BlockOfRun,
  emptySums,
  type MutableSums,
  SUM_ARRAYS,
  scaleSums,
} from './run-sums.ts';
import { addRungOut, type RungOut, ringOut, scaleRungOut } from './rung-out.ts';

/** Sizes of the books. */
export interface BookShape {
  readonly channels: number;
  readonly grid: LagGrid;
  readonly reach: number;
  readonly longestHorizon: number;
  readonly halfLifeTicks: number | null;
  /** Ends of runs that are kept. */
  readonly mostEnds: number;
}

/** What is in, as of the newest tick. */
export interface Books {
  readonly sums: RunSums;
  readonly ends: readonly RunEnd[];
  readonly rungOut: RungOut | null;
  readonly open: OpenRun | null;
}

/** The books while they are written. */
export class RunBook {
  readonly #shape: BookShape;
  readonly #blockTicks: number;
  /** Lags up to it are worked out tick by tick. */
  readonly #near: number;
  readonly #lags: LagSums;
  /** Further ones; null where there are none. */
  readonly #far: FarLags | null;
  readonly #sums: MutableSums;
  #ends: RunEnd[];
  #rungOut: RungOut | null;
  /** Sums and those of runs that rang out count this much: what is added meanwhile is divided by it. */
  #weight = 1;
  /** (nc) of (reach + block): changes of the open run, the newest last; `#filled` of them, the last `#fresh` not yet summed. */
  readonly #changes: Float64Array[];
  readonly #levels: Float64Array[];
  #filled = 0;
  #fresh = 0;
  #isThere: Uint8Array | null = null;
  /** Ticks of the open run, its first included. */
  #ticks = 0;
  /** (nc) u at the last tick. */
  #level: Float64Array;
  /** (nc) u at the first tick. */
  #first: Float64Array;

  constructor(shape: BookShape, from: Books | null) {
    const { channels, grid, reach, halfLifeTicks } = shape;
    this.#shape = shape;
    this.#near = nearReach(reach);
    this.#blockTicks = longestTransform(this.#near) - this.#near;
    const room = this.#near + this.#blockTicks;
    this.#lags = new LagSums(channels, grid, this.#near, nearSpread(reach), 2 * channels * (room + 8));
    this.#far = this.#near < reach ? new FarLags(channels, grid, reach, halfLifeTicks) : null;
    this.#sums = emptySums(channels, grid.lags.length, shape.longestHorizon, from?.sums ?? null);
    this.#ends = [...(from?.ends ?? [])];
    this.#rungOut = addRungOut(from?.rungOut ?? null, 1, null);
    this.#changes = Array.from({ length: channels }, () => this.#lags.alloc(room));
    this.#levels = Array.from({ length: channels }, () => this.#lags.alloc(room));
    this.#level = new Float64Array(channels);
    this.#first = new Float64Array(channels);
    if (from?.open) this.#goOn(from.open);
  }

  /** Opens a run, or goes on with the open one where the same channels are there. `isThere` (nc). */
  open(isThere: Uint8Array): void {
    if (this.#isThere?.every((flag, c) => flag === isThere[c])) return;
    this.close();
    this.#isThere = isThere.slice();
  }

  /** The open run's next ticks: u (nc) of at least `to`, from <= t < to, zeros where a channel is not there. */
  take(u: readonly Float64Array[], from: number, to: number): void {
    for (let t = from; t < to; ) {
      if (this.#fresh === this.#blockTicks) this.#sumUp();
      this.#makeRoom();
      const count = Math.min(to - t, this.#blockTicks - this.#fresh, this.#changes[0].length - this.#filled);
      for (let c = 0; c < u.length; c++) this.#takeChannel(u[c], c, t, count);
      this.#filled += count;
      this.#fresh += count;
      this.#ticks += count;
      t += count;
    }
  }

  /** Ends the open run, if there is one. */
  close(): void {
    if (this.#isThere === null) return;
    const isKept = this.#sumUp();
    if (isKept) {
      this.#ends.push(this.#endOfRun());
      this.#far?.close(this.#rows());
      if (this.#ends.length > this.#shape.mostEnds) this.#ringOut(this.#ends.shift()!);
    }
    this.#isThere = null;
    this.#ticks = 0;
    this.#filled = 0;
    this.#fresh = 0;
  }

  /** Lets time pass in which nothing was read; no run may be open. */
  pass(ticks: number): void {
    this.#age(ticks);
  }

  /** All of it so far; the open run goes on. `isLent`: the sums themselves, good until the next ticks come, no copy. */
  read(isLent: boolean): Books {
    const isKept = this.#isThere !== null && this.#sumUp();
    // As if the run ended now, since sums are over ended runs; what that adds is taken back as after a restart.
    if (isKept) this.#far?.addRest(this.#rows(), 1);
    this.#settleWeight();
    this.#lags.drain(this.#sums.lagged);
    this.#far?.drain(this.#sums.lagged);
    const ends = isKept ? [...this.#ends, this.#endOfRun()] : this.#ends;
    const books = {
      sums: isLent ? this.#sums : this.#sums.copy(),
      ends: [...ends],
      rungOut: addRungOut(this.#rungOut, 1, null),
      open: this.#openRun(),
    };
    if (isKept) this.#far?.addRest(this.#rows(), -1);
    return books;
  }

  /** Takes all it holds along, or brings it back. */
  carry(carrier: Carrier): void {
    this.#lags.carry(carrier);
    this.#far?.carry(carrier);
    for (const key of SUM_ARRAYS) carrier.fill(this.#sums[key]);
    this.#sums.count = carrier.number(this.#sums.count);
    this.#weight = carrier.number(this.#weight);
    this.#carryEnds(carrier);
    this.#ticks = carrier.number(this.#ticks);
    this.#filled = carrier.number(this.#filled);
    this.#fresh = carrier.number(this.#fresh);
    // Without a run nothing is filled, and what was there before does not matter.
    const isThere = carrier.flags(this.#isThere ?? new Uint8Array(0));
    this.#isThere = isThere.length === 0 ? null : isThere;
    carrier.fill(this.#level);
    carrier.fill(this.#first);
    for (const row of [...this.#changes, ...this.#levels]) carrier.fill(row.subarray(0, this.#filled));
  }

  #carryEnds(carrier: Carrier): void {
    const { channels, grid } = this.#shape;
    const places = channels * grid.lags.length;
    const count = carrier.number(this.#ends.length);
    this.#ends = Array.from({ length: count }, (_, n) => {
      const end = this.#ends[n];
      return {
        weight: carrier.number(end?.weight ?? 0),
        isThere: carrier.flags(end?.isThere ?? new Uint8Array(0)),
        level: carrier.list(end?.level ?? new Float64Array(0)),
        changes: carrier.list(end?.changes ?? new Float64Array(0)),
      };
    });
    if (carrier.number(this.#rungOut === null ? 0 : 1) === 0) return;
    this.#rungOut ??= { levels: new Float64Array(channels * places), changes: new Float64Array(channels * places) };
    carrier.fill(this.#rungOut.levels);
    carrier.fill(this.#rungOut.changes);
  }

  #takeChannel(values: Float64Array, c: number, from: number, count: number): void {
    const changes = this.#changes[c];
    const levels = this.#levels[c];
    const at = this.#filled;
    if (this.#ticks === 0) this.#first[c] = values[from];
    let last = this.#ticks === 0 ? values[from] : this.#level[c];
    for (let k = 0; k < count; k++) {
      const value = values[from + k];
      changes[at + k] = value - last;
      levels[at + k] = value;
      last = value;
    }
    this.#level[c] = last;
  }

  /** Keeps the last `reach` changes in front of what comes. */
  #makeRoom(): void {
    if (this.#filled < this.#changes[0].length) return;
    const drop = this.#filled - this.#near - this.#fresh;
    for (const row of [...this.#changes, ...this.#levels]) row.copyWithin(0, drop, this.#filled);
    this.#filled -= drop;
  }

  /** Sums up what is fresh; false where the run is too short to count, and stays fresh. */
  #sumUp(): boolean {
    const { channels, longestHorizon, halfLifeTicks } = this.#shape;
    if (this.#ticks < longestHorizon + 2) return false;
    const count = this.#fresh;
    if (count === 0) return true;
    this.#age(count);
    const start = this.#filled - count;
    const weights = halfLifeTicks === null ? null : ageWeights(count, halfLifeTicks);
    const block: BlockOfRun = {
      changes: this.#changes.map((row) => row.subarray(start, this.#filled)),
      levels: this.#levels.map((row) => row.subarray(start, this.#filled)),
      weights: weights === null || this.#weight === 1 ? weights : weights.map((value) => value / this.#weight),
      firstTick: this.#ticks - count,
      first: this.#first,
      isThere: this.#isThere!,
    };
    addLevels(this.#sums, block, channels, (a, b) => this.#lags.dot(a, b));
    if (block.firstTick === 0) addHeads(this.#sums, block, channels, longestHorizon);
    const before = Math.min(start, this.#near);
    const earlier = this.#changes.map((row) => row.subarray(start - before, this.#filled));
    const later =
      weights === null ? block.changes : block.changes.map((row) => row.map((value, k) => value * weights[k]));
    this.#lags.add(earlier, later);
    this.#fresh = 0;
    this.#far?.take(this.#rows());
    return true;
  }

  #age(ticks: number): void {
    const { halfLifeTicks } = this.#shape;
    if (halfLifeTicks === null || ticks === 0) return;
    const factor = 2 ** (-ticks / halfLifeTicks);
    this.#lags.scale(factor);
    this.#far?.scale(factor);
    this.#weight *= factor;
    if (this.#weight < LEAST_WEIGHT) this.#settleWeight();
    this.#ends = this.#ends.map((end) => ({ ...end, weight: end.weight * factor }));
  }

  #ringOut(end: RunEnd): void {
    this.#rungOut = ringOut(this.#rungOut, { ...end, weight: end.weight / this.#weight });
  }

  #settleWeight(): void {
    if (this.#weight === 1) return;
    scaleSums(this.#sums, this.#weight);
    scaleRungOut(this.#rungOut, this.#weight);
    this.#weight = 1;
  }

  #endOfRun(): RunEnd {
    const { grid, reach, channels } = this.#shape;
    const changes = new Float64Array(channels * grid.lags.length);
    const from = Math.max(0, this.#filled - this.#near);
    const byAge = this.#changes.map((row) => row.slice(from, this.#filled).reverse());
    this.#lags.spread(byAge, byAge[0].length, changes, nearSpread(reach));
    this.#far?.spreadByAge(this.#ticks, changes);
    return { weight: 1, isThere: this.#isThere!.slice(), level: this.#level.slice(), changes };
  }

  #rows(): RunRows {
    return { changes: this.#changes, filled: this.#filled, ticks: this.#ticks };
  }

  #openRun(): OpenRun | null {
    if (this.#isThere === null || this.#ticks === 0) return null;
    const kept = Math.min(this.#filled, Math.max(this.#near, this.#fresh));
    return {
      isThere: this.#isThere.slice(),
      ticks: this.#ticks,
      level: this.#level.slice(),
      changes: this.#changes.map((row) => row.slice(this.#filled - kept, this.#filled)),
      thinned: this.#far?.kept() ?? this.#changes.map(() => new Float64Array(0)),
    };
  }

  #goOn(open: OpenRun): void {
    const isKept = open.ticks >= this.#shape.longestHorizon + 2;
    if (isKept) this.#ends.pop();
    this.#isThere = open.isThere.slice();
    this.#ticks = open.ticks;
    this.#level = open.level.slice();
    this.#filled = open.changes[0].length;
    this.#fresh = isKept ? 0 : this.#filled;
    open.changes.forEach((row, c) => {
      this.#changes[c].set(row);
      let level = open.level[c];
      for (let k = row.length - 1; k >= 0; k--) {
        this.#levels[c][k] = level;
        level -= row[k];
      }
      this.#first[c] = level;
    });
    if (!isKept || this.#far === null) return;
    this.#far.restore(open.thinned, open.ticks);
    this.#far.addRest(this.#rows(), -1);
  }
}

/** Beyond it numbers would be divided by nearly nothing. */
const LEAST_WEIGHT = 1e-30;

/** (count) weights by age, the newest one. */
function ageWeights(count: number, halfLifeTicks: number): Float64Array {
  return Float64Array.from({ length: count }, (_, k) => 2 ** (-(count - 1 - k) / halfLifeTicks));
}
