/**
 * Lags beyond a few ten thousand ticks, from changes thinned to every eighth tick. What a bank asks of such lags is smooth, a
 * pole's powers, so its value between the thinned ticks follows from those around by interpolation: Σ G(t - s) D(t) D(s) over all
 * ticks equals Σ G(8T - 8S) D'(T) D'(S), with D'(T) = Σ k(t - 8T) D(t) and k the interpolation's kernel. The memory that lags
 * take is then an eighth, and so is the work. Weights by age are as smooth as G, and are interpolated along with it: a thinned
 * tick weighs what its own age says.
 *
 * G must not begin with a step. So lags are shared out: those up to 16,384 are near ones, those from 24,576 on far ones, and in
 * between a lag counts in part as either, by a logistic step so flat at both ends that nothing is seen of them.
 *
 * The kernel is a sinc under a Kaiser window of twelve thinned ticks on either side (Oppenheim & Schafer, Discrete-Time Signal
 * Processing, section 7.5: 125 dB, passed up to a third of the thinned rate). The fastest resonator that has not fallen to e^-16
 * by lag 16,384 turns once in 24 ticks, three thinned ones.
 */
import type { LagGrid } from './lag-grid.ts';
import { LagSums, longestTransform, type Spread } from './lag-sums.ts';
import type { Carrier } from './open-state.ts';

/** Ticks to a thinned one. */
export const THIN = 8;
/** Furthest lag that is worked out tick by tick where lags are shared out. */
const NEAR_REACH = 24_576;
const SHARED_FROM = 16_384;
/** From this reach on they are: below, one transform holds them all. */
const SPLIT_REACH = 43_690;
/** Thinned ticks on either side of the kernel. */
const SIDE = 12;
const KAISER = 12.8;
const KERNEL = kernelOf();

/**
 * Furthest lag that is worked out tick by tick.
 *
 * shapes  none
 * units   ticks
 * throws  nothing
 * source  file head
 * cost    trivial
 */
export function nearReach(reach: number): number {
  return reach > SPLIT_REACH ? NEAR_REACH : reach;
}

/**
 * How near lags are spread: each by its near share.
 *
 * shapes  none
 * units   none
 * throws  nothing
 * source  file head
 * cost    trivial
 */
export function nearSpread(reach: number): Spread {
  return { start: 0, stride: 1, share: reach > SPLIT_REACH ? nearShare : () => 1 };
}

/** What of a lag counts as near. */
function nearShare(lag: number): number {
  if (lag <= SHARED_FROM) return 1;
  if (lag >= NEAR_REACH) return 0;
  const along = (lag - SHARED_FROM) / (NEAR_REACH - SHARED_FROM);
  return 1 / (1 + Math.exp(36 * (2 * along - 1)));
}

/** The last changes of a run, as the book has them. */
export interface RunRows {
  /** (nc) rows, filled up to `filled`; the last belongs to tick `ticks` - 1 of the run. */
  readonly changes: readonly Float64Array[];
  readonly filled: number;
  readonly ticks: number;
}

/** The far lags of one run after another. */
export class FarLags {
  readonly #channels: number;
  readonly #halfLifeTicks: number | null;
  readonly #reach: number;
  readonly #blockTicks: number;
  readonly #lags: LagSums;
  /** (nc) of (reach + block) thinned changes, and the same weighted. */
  readonly #earlier: Float64Array[];
  readonly #later: Float64Array[];
  #filled = 0;
  #fresh = 0;
  /** The next thinned tick. */
  #next = -SIDE;

  constructor(channels: number, grid: LagGrid, reach: number, halfLifeTicks: number | null) {
    this.#channels = channels;
    this.#halfLifeTicks = halfLifeTicks;
    this.#reach = Math.floor(reach / THIN);
    this.#lags = new LagSums(channels, grid, this.#reach, {
      start: 0,
      stride: THIN,
      share: (lag) => 1 - nearShare(lag),
    });
    this.#blockTicks = longestTransform(this.#reach) - this.#reach;
    const make = (): Float64Array => new Float64Array(this.#reach + this.#blockTicks);
    this.#earlier = Array.from({ length: channels }, make);
    this.#later = halfLifeTicks === null ? this.#earlier : Array.from({ length: channels }, make);
  }

  /** Thins what is complete of a run. */
  take(run: RunRows): void {
    this.#thin(run, Math.floor(run.ticks / THIN) - SIDE);
  }

  /** The run has ended. */
  close(run: RunRows): void {
    this.#thin(run, Math.floor((run.ticks - 1) / THIN) + SIDE);
    this.#sumUp();
    this.#filled = 0;
    this.#next = -SIDE;
  }

  /**
   * Adds, or with -1 takes back, what would still come if the run ended now; it goes on after.
   */
  addRest(run: RunRows, sign: 1 | -1): void {
    this.#sumUp();
    // What is thinned here goes again, and must not push out what came before.
    if (this.#filled + 2 * SIDE + 1 > this.#earlier[0].length) this.#makeRoom();
    const [filled, next] = [this.#filled, this.#next];
    this.#thin(run, Math.floor((run.ticks - 1) / THIN) + SIDE);
    this.#sumUp(sign);
    this.#filled = filled;
    this.#next = next;
  }

  /** Takes all it holds along, or brings it back. */
  carry(carrier: Carrier): void {
    this.#lags.carry(carrier);
    this.#filled = carrier.number(this.#filled);
    this.#fresh = carrier.number(this.#fresh);
    this.#next = carrier.number(this.#next);
    for (const row of new Set([...this.#earlier, ...this.#later])) carrier.fill(row.subarray(0, this.#filled));
  }

  /** Makes all that is in lighter. */
  scale(factor: number): void {
    this.#lags.scale(factor);
    for (const row of this.#later) for (let k = this.#filled - this.#fresh; k < this.#filled; k++) row[k] *= factor;
  }

  /** Adds the lags to sums over the grid's places. */
  drain(into: Float64Array): void {
    this.#lags.drain(into);
  }

  /** (nc) the thinned changes that later ones may still meet. */
  kept(): Float64Array[] {
    const from = Math.max(0, this.#filled - this.#reach);
    return this.#earlier.map((row) => row.slice(from, this.#filled));
  }

  /** Goes on with a run of so many ticks. */
  restore(kept: readonly Float64Array[], ticks: number): void {
    kept.forEach((row, c) => {
      this.#earlier[c].set(row);
    });
    this.#filled = kept[0].length;
    this.#fresh = 0;
    this.#next = Math.floor(ticks / THIN) - SIDE + 1;
  }

  /** Adds the run's thinned changes by their age to sums over the grid's places. */
  spreadByAge(ticks: number, into: Float64Array): void {
    const start = ticks - 1 - THIN * (this.#next - 1);
    const from = Math.max(0, this.#filled - this.#reach);
    const byAge = this.#earlier.map((row) => row.slice(from, this.#filled).reverse());
    this.#lags.spread(byAge, byAge[0].length, into, { start, stride: THIN, share: (lag) => 1 - nearShare(lag) });
  }

  /** Thins up to a thinned tick. */
  #thin(run: RunRows, last: number): void {
    for (; this.#next <= last; this.#next++) {
      if (this.#fresh === this.#blockTicks) this.#sumUp();
      if (this.#filled === this.#earlier[0].length) this.#makeRoom();
      const weight = this.#weightOf(run.ticks - 1 - THIN * this.#next);
      for (let c = 0; c < this.#channels; c++) {
        const value = thinned(run, c, this.#next);
        this.#earlier[c][this.#filled] = value;
        this.#later[c][this.#filled] = weight * value;
      }
      this.#filled++;
      this.#fresh++;
    }
  }

  #weightOf(age: number): number {
    return this.#halfLifeTicks === null ? 1 : 2 ** (-age / this.#halfLifeTicks);
  }

  #makeRoom(): void {
    const drop = this.#filled - this.#reach - this.#fresh;
    for (const row of new Set([...this.#earlier, ...this.#later])) row.copyWithin(0, drop, this.#filled);
    this.#filled -= drop;
  }

  #sumUp(sign: 1 | -1 = 1): void {
    if (this.#fresh === 0) return;
    const start = this.#filled - this.#fresh;
    const from = Math.max(0, start - this.#reach);
    const earlier = this.#earlier.map((row) => row.subarray(from, this.#filled));
    const later = this.#later.map((row) => row.slice(start, this.#filled).map((value) => sign * value));
    this.#lags.add(earlier, later);
    this.#fresh = 0;
  }
}

/** Σ k(t - 8T) D(t). */
function thinned(run: RunRows, c: number, at: number): number {
  const row = run.changes[c];
  // Place of the thinned tick itself; before a run's first tick and after its last nothing changes.
  const centre = run.filled - run.ticks + THIN * at;
  const from = Math.max(0, run.filled - run.ticks, centre - THIN * SIDE + 1);
  const to = Math.min(run.filled, centre + THIN * SIDE);
  let sum = 0;
  if (to - from < 2 * THIN * SIDE - 1) {
    for (let p = from; p < to; p++) sum += KERNEL[Math.abs(p - centre)] * row[p];
    return sum;
  }
  sum = KERNEL[0] * row[centre];
  let odd = 0;
  for (let x = 1; x < THIN * SIDE - 1; x += 2) {
    sum += KERNEL[x] * (row[centre + x] + row[centre - x]);
    odd += KERNEL[x + 1] * (row[centre + x + 1] + row[centre - x - 1]);
  }
  const last = THIN * SIDE - 1;
  return sum + odd + KERNEL[last] * (row[centre + last] + row[centre - last]);
}

/** (8 · 12) the kernel at whole ticks from its middle. */
function kernelOf(): Float64Array {
  const length = THIN * SIDE;
  return Float64Array.from({ length }, (_, x) => {
    const sinc = x === 0 ? 1 : Math.sin((Math.PI * x) / THIN) / ((Math.PI * x) / THIN);
    return (sinc * bessel0(KAISER * Math.sqrt(1 - (x / length) ** 2))) / bessel0(KAISER);
  });
}

/** I₀(x) by its power series. */
function bessel0(x: number): number {
  let sum = 1;
  let term = 1;
  for (let k = 1; term > 1e-17 * sum; k++) {
    term *= (x / (2 * k)) ** 2;
    sum += term;
  }
  return sum;
}
