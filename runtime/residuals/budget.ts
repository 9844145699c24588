/**
 * Keeps segments within the site's bytes a day by shedding resolution, and says where: readings of a signal are kept on
 * every 2nd, 4th, … step of its sensor, the gateway's own filter included, until the day's bytes fit again. Whoever has the
 * most bits to give gives first, one bit at a time: the signal whose steps are finest beside what the model misses of it.
 * None is made coarser than that miss, where rounding adds a twelfth to the variance of the one-step error and a reading
 * still costs two bits; what then still exceeds the budget is sent all the same, since readings matter more than bytes.
 *
 * A spool that fills is rationed likewise: once over half full, what is free must last another thirty days.
 *
 * Decided at segment boundaries alone and kept in the checkpoint, so that a restart changes nothing.
 */
import { MAX_COARSENESS, type Site } from '@stillwell/protocol';
import type { Model } from '@stillwell/runtime/filter';

/** What a budget starts from. */
export interface BudgetOptions {
  readonly bytesPerDay: number;
  readonly tickMs: number;
  readonly channelCount: number;
  /** Bound of the spool, bytes. */
  readonly spoolBytes: number;
}

/** As the checkpoint keeps it. */
export interface BudgetState {
  /** (nc) */
  readonly coarseness: Uint8Array;
  /** Smoothed bytes a tick, starts in full left out. */
  readonly bytesPerTick: number;
  /** Ticks behind that figure. */
  readonly ticks: number;
  /** Bytes of the last start in full. */
  readonly startBytes: number;
}

/** A segment that has closed. */
export interface ClosedSegment {
  readonly bytes: number;
  /** Of these, the start in full. */
  readonly startBytes: number;
  readonly ticks: number;
  /** (nc) size of the residuals in steps of the sensor. */
  readonly residualSteps: Float64Array;
  /** Ticks from one start in full to the next, at present. */
  readonly ticksBetweenStarts: number;
  /** Bytes waiting in the spool. */
  readonly waitingBytes: number;
}

/** The budget of a site. `spoolBytes`: bound of its spool. */
export function budgetOf(site: Site, spoolBytes: number): ResolutionBudget {
  const { residualBytesPerDay: bytesPerDay, tickMs } = site;
  return new ResolutionBudget({
    bytesPerDay,
    tickMs,
    channelCount: site.signals.length + site.inputs.length,
    spoolBytes,
  });
}

const DAY_MS = 86_400_000;
/** Bytes a tick are a mean over so long: a busy hour may cost more than its share. */
const SMOOTH_MS = 6 * 3_600_000;
/** Finer again only where that leaves so much of the budget free, or it would go to and fro. */
const EASE = 0.9;
/** Least size of a residual in steps of the record. */
const LEAST_STEPS = 1;
/** A signal this much below it has grown calmer since: it gains by finer steps and hardly costs more. */
const CALMER = 0.5;
/** A guard that counts fewer readings alike could take coarse ones for a hanging sensor. */
const LEAST_ALIKE = 16;
const RATION_DAYS = 30;

/** See the file head. */
export class ResolutionBudget {
  readonly #options: BudgetOptions;
  readonly #dayTicks: number;
  /** (nc) of the open segment; changed at its boundary alone. */
  readonly coarseness: Uint8Array;
  #bytesPerTick = 0;
  #ticks = 0;
  #startBytes = 0;
  #projected = 0;
  #isShort = false;

  constructor(options: BudgetOptions) {
    this.#options = options;
    this.#dayTicks = DAY_MS / options.tickMs;
    this.coarseness = new Uint8Array(options.channelCount);
  }

  /** Bytes a day that segments come to as they are now; 0 before the first. */
  get projectedBytes(): number {
    return this.#projected;
  }

  /** Whether the budget is exceeded and there is no resolution left to shed. */
  get isShort(): boolean {
    return this.#isShort;
  }

  get state(): BudgetState {
    return {
      coarseness: this.coarseness.slice(),
      bytesPerTick: this.#bytesPerTick,
      ticks: this.#ticks,
      startBytes: this.#startBytes,
    };
  }

  /** Goes on from a checkpoint; one of other channels is passed over. */
  restore(state: BudgetState): void {
    if (state.coarseness.length !== this.coarseness.length) return;
    this.coarseness.set(state.coarseness);
    this.#bytesPerTick = state.bytesPerTick;
    this.#ticks = state.ticks;
    this.#startBytes = state.startBytes;
    this.#projected = this.#bytesPerTick * this.#dayTicks;
  }

  /** Takes a closed segment into account and settles the coarseness of the next; `model` is the one that will serve it. */
  closed(segment: ClosedSegment, model: Model): void {
    this.#account(segment);
    const allowed = this.#allowed(segment.waitingBytes);
    const before = this.coarseness.slice();
    if (this.#projected > allowed) this.#shed(allowed, segment.residualSteps, model);
    else this.#ease(allowed, segment.residualSteps);
    // What a bit more or less will cost is known beforehand: the mean of the past must not ask for it twice.
    let bits = 0;
    for (let c = 0; c < before.length; c++) bits += before[c]! - this.coarseness[c]!;
    this.#bytesPerTick = Math.max(0, this.#bytesPerTick + bits / 8);
  }

  #account({ bytes, startBytes, ticks, ticksBetweenStarts }: ClosedSegment): void {
    const window = Math.max(1, SMOOTH_MS / this.#options.tickMs);
    this.#ticks += ticks;
    const weight = ticks / Math.max(1, ticks, Math.min(window, this.#ticks));
    const own = (bytes - startBytes) / Math.max(1, ticks);
    this.#bytesPerTick += weight * (own - this.#bytesPerTick);
    if (startBytes > 0) this.#startBytes = startBytes;
    const starts = this.#dayTicks / Math.max(1, ticksBetweenStarts);
    this.#projected = this.#bytesPerTick * this.#dayTicks + this.#startBytes * starts;
  }

  #allowed(waitingBytes: number): number {
    const { bytesPerDay, spoolBytes } = this.#options;
    if (waitingBytes <= spoolBytes / 2) return bytesPerDay;
    return Math.min(bytesPerDay, Math.max(0, spoolBytes - waitingBytes) / RATION_DAYS);
  }

  /** One bit after the other, each from where it is missed least. */
  #shed(allowed: number, residualSteps: Float64Array, model: Model): void {
    while (this.#projected > allowed) {
      let finest = -1;
      let most = 2 * LEAST_STEPS;
      for (let c = 0; c < this.coarseness.length; c++) {
        const steps = residualSteps[c]! / 2 ** this.coarseness[c]!;
        if (steps < most || !mayBe(model, c, this.coarseness[c]! + 1)) continue;
        finest = c;
        most = steps;
      }
      this.#isShort = finest < 0;
      if (finest < 0) return;
      this.coarseness[finest]!++;
      this.#projected -= this.#dayTicks / 8;
    }
    this.#isShort = false;
  }

  /** Gives bits back, first to the signal that is coarsest beside its residuals. */
  #ease(allowed: number, residualSteps: Float64Array): void {
    this.#isShort = false;
    const bit = this.#dayTicks / 8;
    for (;;) {
      let coarsest = -1;
      let least = Number.POSITIVE_INFINITY;
      for (let c = 0; c < this.coarseness.length; c++) {
        const power = this.coarseness[c]!;
        const steps = residualSteps[c]! / 2 ** power;
        if (power === 0 || steps >= least) continue;
        coarsest = c;
        least = steps;
      }
      if (coarsest < 0 || (this.#projected + bit > EASE * allowed && least >= CALMER * LEAST_STEPS)) return;
      this.coarseness[coarsest]!--;
      this.#projected += bit;
      if (this.#projected > allowed) return;
    }
  }
}

/** Whether readings of a channel may lie on every 2^power-th step: the guard against hanging sensors must not see one in it. */
function mayBe({ stuck, signalCount, latticeStep, latticeOffset }: Model, channel: number, power: number): boolean {
  if (power > MAX_COARSENESS) return false;
  if (stuck === undefined || channel >= signalCount || stuck.ticks[channel] === 0) return true;
  if (stuck.ticks[channel]! < LEAST_ALIKE) return false;
  const steps = 2 ** power;
  // A value the plant rests at stays one only if it is not rounded away.
  return stuck.rests[channel]!.every((value) => {
    const index = Math.round((value - latticeOffset[channel]!) / latticeStep[channel]!);
    return index % steps === 0;
  });
}
