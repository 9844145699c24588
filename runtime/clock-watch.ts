/**
 * What a stepping wall clock means to the ticks. A step ahead leaves out the ticks that it jumped, in which no time passed.
 * A clock behind the ticks that were closed, by more than waiting would mend soon, makes the record start anew: a new stream
 * of segments and a filter that starts afresh, so that forecasts go on within a minute instead of when the old time has
 * come again. The same at a start, where the clock of before was wrong or the one of now is.
 */
import type { SteadyClock } from './steady-clock.ts';

/** A clock behind by no more, or by no more than a few ticks, is waited for. */
const WAITED_FOR_MS = 60_000;
const WAITED_FOR_TICKS = 3;
/** A step ahead over no more ticks than this is bridged like an outage. */
const BRIDGED_TICKS = 60;
/** At a start the clock is given so long to be put right. */
const START_PATIENCE_MS = 20_000;

/** What is done to the ticks: the engine. */
export interface Ticked {
  readonly aligner: { readonly nextTick: number | null };
  /** Leaves out what a clock's step ahead passed over. */
  passOver(nowMs: number, most: number): void;
  /** Starts record and filter anew. */
  renewAt(tick: number): void;
}

/** See the file head. */
export class ClockWatch {
  readonly #clock: SteadyClock;
  readonly #engine: Ticked;
  readonly #tickMs: number;
  readonly #note: (text: string) => void;
  /** Steps believed and not yet acted on: they come in the midst of whatever asked for the time. */
  #step = 0;
  #behindSince: number | null = null;
  #renewals = 0;
  #wasInDoubt = false;

  constructor(clock: SteadyClock, engine: Ticked, tickMs: number, note: (text: string) => void) {
    this.#clock = clock;
    this.#engine = engine;
    this.#tickMs = tickMs;
    this.#note = note;
    clock.onStep = (stepMs) => {
      this.#step += stepMs;
    };
  }

  /** For health. */
  get counts(): Readonly<Record<string, number>> {
    return { ...this.#clock.counts, records_renewed: this.#renewals };
  }

  /** Why the time is not sure, in words; null while it is. */
  get doubt(): string | null {
    const stepMs = this.#clock.doubtMs;
    if (stepMs === 0) return null;
    return `the clock stepped ${moved(stepMs)} and is not believed yet: time goes on by the monotonic clock`;
  }

  /** Call before ticks are closed by the wall clock. Returns whether there is news for health. */
  check(): boolean {
    const wall = this.#clock.wall();
    const step = this.#step;
    this.#step = 0;
    if (step !== 0) this.#note(`the clock was set ${moved(step)}, and has stood so since`);
    if (step > 0) this.#engine.passOver(wall, BRIDGED_TICKS);
    const hasRenewed = this.#renewIfBehind(wall, step < 0);
    const isInDoubt = this.#clock.doubtMs !== 0;
    const isNews = step !== 0 || hasRenewed || isInDoubt !== this.#wasInDoubt;
    this.#wasInDoubt = isInDoubt;
    return isNews;
  }

  #renewIfBehind(wall: number, isSure: boolean): boolean {
    const { nextTick } = this.#engine.aligner;
    const behindMs = nextTick === null ? 0 : nextTick * this.#tickMs - wall;
    if (behindMs <= Math.max(WAITED_FOR_MS, WAITED_FOR_TICKS * this.#tickMs)) {
      this.#behindSince = null;
      return false;
    }
    const now = this.#clock.monotonic();
    this.#behindSince ??= now;
    if (!isSure && now - this.#behindSince < START_PATIENCE_MS) return false;
    this.#behindSince = null;
    this.#renewals++;
    this.#note(`the clock is ${seconds(behindMs)} behind the ticks closed so far: record and filter start anew`);
    this.#engine.renewAt(Math.floor(wall / this.#tickMs));
    return true;
  }
}

function moved(stepMs: number): string {
  return `${seconds(stepMs)} ${stepMs > 0 ? 'ahead' : 'back'}`;
}

function seconds(ms: number): string {
  return `${(Math.abs(ms) / 1000).toFixed(0)} s`;
}
