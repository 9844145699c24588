/**
 * Electric defrosts of a cold store as its planner lays them: one run in each window of the local day, its start drawn
 * anew every day, so that neither clock nor calendar tells it. The plant and the plan read the same times.
 */
import { openRandom } from '../random.ts';

/** How a store is defrosted. */
export interface DefrostDesign {
  /** Local hours [from, to) inside which one run begins; a run must end before midnight. */
  readonly windows: readonly (readonly [number, number])[];
  readonly minutes: number;
  /** Of the heaters, kW. */
  readonly power: number;
}

/** A command and the moment from which it holds. */
export interface Command {
  readonly timeMs: number;
  readonly value: 0 | 1;
}

const DAY_MS = 86_400_000;
const HOUR_MS = 3_600_000;

/** The runs of one store under one seed. */
export class DefrostTimes {
  private readonly design: DefrostDesign;
  private readonly name: string;
  private readonly seed: number;
  private readonly tickMs: number;
  private readonly offsetMs: number;
  private readonly days = new Map<number, readonly number[]>();

  /** Runs begin at whole ticks. */
  constructor(design: DefrostDesign, name: string, seed: number, tickMs: number, utcOffsetHours: number) {
    this.design = design;
    this.name = name;
    this.seed = seed;
    this.tickMs = tickMs;
    this.offsetMs = utcOffsetHours * HOUR_MS;
  }

  /** Whether the heaters are commanded on. */
  isOn(nowMs: number): boolean {
    const lengthMs = this.design.minutes * 60_000;
    return this.startsOf(this.dayOf(nowMs)).some((start) => nowMs >= start && nowMs < start + lengthMs);
  }

  /** The command at `fromMs`, and every change of it before `toMs`. */
  commands(fromMs: number, toMs: number): Command[] {
    const changes: Command[] = [{ timeMs: fromMs, value: this.isOn(fromMs) ? 1 : 0 }];
    for (let day = this.dayOf(fromMs); day <= this.dayOf(toMs); day++)
      for (const start of this.startsOf(day))
        changes.push({ timeMs: start, value: 1 }, { timeMs: start + this.design.minutes * 60_000, value: 0 });
    return changes.filter(({ timeMs }, k) => k === 0 || (timeMs > fromMs && timeMs < toMs));
  }

  private dayOf(timeMs: number): number {
    return Math.floor((timeMs + this.offsetMs) / DAY_MS);
  }

  /** Starts of a local day, ms since 1970, rising. */
  private startsOf(day: number): readonly number[] {
    let starts = this.days.get(day);
    if (starts === undefined) {
      const random = openRandom(this.seed, `defrosts ${this.name} ${day}`);
      starts = this.design.windows.map(([from, to]) => {
        const drawn = day * DAY_MS - this.offsetMs + (from + (to - from) * random.uniform()) * HOUR_MS;
        return Math.floor(drawn / this.tickMs) * this.tickMs;
      });
      this.days.set(day, starts);
    }
    return starts;
  }
}
