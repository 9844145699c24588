/**
 * A wall clock that is believed only once it has shown itself steady. Between two looks the monotonic clock says how much
 * time has passed; where the wall clock says otherwise by more than a little, it stepped. A step is not believed at once: a
 * wrong one is often taken back, and what was stamped under it would stand in the record. Meanwhile time goes on as it did,
 * by the monotonic clock. A clock that was set never goes back to one that was not.
 */
import type { Clock } from './clock.ts';

/** A wall clock before 2020 was never set: only the readings' own times can then be believed. */
export const CLOCK_UNSET_MS = Date.UTC(2020, 0, 1);
/** Less is no step: it is followed at once. A leap second and what a time service corrects by slewing stay below. */
const STEP_MS = 5000;
/** A step that has stood so long, by the monotonic clock, is believed. */
const BELIEVED_AFTER_MS = 20_000;

/** Counted since the start. */
export interface ClockCounts {
  /** Steps believed. */
  readonly steps_ahead: number;
  readonly steps_back: number;
  /** Steps taken back, or followed by another, before they were believed. */
  readonly steps_passed_over: number;
}

/** See the file head. A clock itself, for whoever wants the time. */
export class SteadyClock implements Clock {
  readonly #clock: Clock;
  readonly #counts = { steps_ahead: 0, steps_back: 0, steps_passed_over: 0 };
  /** Believed wall time less monotonic time. */
  #offset: number;
  #suspect: { offset: number; since: number } | null = null;
  /** Called when a step is believed, with its size in ms, signed; not when a clock that was never set is set. */
  onStep: (stepMs: number) => void = () => {};

  constructor(clock: Clock) {
    this.#clock = clock;
    this.#offset = clock.wall() - clock.monotonic();
  }

  get counts(): ClockCounts {
    return this.#counts;
  }

  /** By how much the wall clock differs from what is believed, in ms, while that is not decided; 0 otherwise. */
  get doubtMs(): number {
    return this.#suspect === null ? 0 : this.#suspect.offset - this.#offset;
  }

  wall(): number {
    const monotonic = this.#clock.monotonic();
    this.#look(this.#clock.wall() - monotonic, monotonic);
    return monotonic + this.#offset;
  }

  monotonic(): number {
    return this.#clock.monotonic();
  }

  after(ms: number, work: () => void): () => void {
    return this.#clock.after(ms, work);
  }

  #look(offset: number, monotonic: number): void {
    const suspect = this.#suspect;
    if (Math.abs(offset - this.#offset) <= STEP_MS) {
      if (suspect !== null) this.#counts.steps_passed_over++;
      this.#suspect = null;
      this.#offset = offset;
      return;
    }
    if (suspect === null || Math.abs(offset - suspect.offset) > STEP_MS) {
      if (suspect !== null) this.#counts.steps_passed_over++;
      this.#suspect = { offset, since: monotonic };
      return;
    }
    suspect.offset = offset;
    if (monotonic - suspect.since >= BELIEVED_AFTER_MS) this.#believe(offset, monotonic);
  }

  #believe(offset: number, monotonic: number): void {
    const before = this.#offset + monotonic;
    const after = offset + monotonic;
    // Told as doubt for as long as it lasts, but not followed.
    if (before >= CLOCK_UNSET_MS && after < CLOCK_UNSET_MS) return;
    this.#suspect = null;
    this.#offset = offset;
    if (after > before) this.#counts.steps_ahead++;
    else this.#counts.steps_back++;
    if (before >= CLOCK_UNSET_MS) this.onStep(after - before);
  }
}
