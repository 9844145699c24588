/**
 * Publishes what a site's planner says of its defrosts, ahead and retained, again every few hours of plant time. For a
 * stretch the plan can be made wrong: its runs are told later than the plant makes them, as when somebody moves them at
 * the panel and tells nobody.
 */
import type { DefrostTimes } from './plants/defrost.ts';

/** What a feed publishes, and when. Ticks are absolute. */
export interface PlanFeedOptions {
  readonly times: DefrostTimes;
  readonly tickMs: number;
  readonly firstTick: number;
  /** From the first of them up to but not including the second, plans say `lateMs` too late. */
  readonly wrong: readonly [number, number];
  readonly lateMs: number;
  readonly publish: (payload: string) => void;
}

const EVERY_MS = 6 * 3_600_000;
/** How far a plan reaches: much further than any forecast, so that one lost message would not matter. */
const REACH_MS = 36 * 3_600_000;

/** The planner of one site. */
export class PlanFeed {
  published = 0;
  private readonly options: PlanFeedOptions;

  constructor(options: PlanFeedOptions) {
    this.options = options;
  }

  /** Tells the plan if it is time to; to be called at every tick, before its readings are sent. */
  atTick(tick: number): void {
    const { tickMs, firstTick, wrong, publish } = this.options;
    const isDue = (tick - firstTick) % (EVERY_MS / tickMs) === 0;
    if (!isDue && !wrong.includes(tick)) return;
    this.published++;
    publish(this.plan(tick));
  }

  private plan(tick: number): string {
    const { times, tickMs, wrong, lateMs } = this.options;
    const nowMs = tick * tickMs;
    const shift = tick >= wrong[0] && tick < wrong[1] ? lateMs : 0;
    const told = (ms: number): string => new Date(ms).toISOString();
    const points = times
      .commands(nowMs - shift, nowMs - shift + REACH_MS)
      .map(({ timeMs, value }) => ({ time: told(timeMs + shift), value }));
    return JSON.stringify({ issued_at: told(nowMs), points, end: told(nowMs + REACH_MS) });
  }
}
