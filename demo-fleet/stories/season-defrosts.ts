/**
 * The part of the season that plays around one store's planned defrosts: the plan goes out ahead, is wrong for a while, and
 * the same bundle runs beside the gateway without any plan.
 */
import { expectBetween, expectExactly, type Verdict } from '../check.ts';
import type { Fleet } from '../fleet.ts';
import { PlanFeed } from '../plan-feed.ts';
import { type PlanCounts, PlanWatch } from '../plan-watch.ts';
import { defrostTimesOf } from '../plants/build.ts';
import { DEMO_SITES } from '../plants/sites.ts';
import type { Score } from '../scores.ts';
import { planTopic } from '../site-files.ts';
import type { SiteRun } from '../site-run.ts';
import { StandIn } from '../stand-in.ts';
import { PLAN_LATE_MS, PLANNED, type Timetable } from './season-plan.ts';

/** Stretch under a plan that is not kept. */
export const WRONG_PLAN = 'wrong plan';
/** Stretch under a plan that is kept: as every site's before anything happens to it. */
const RIGHT_PLAN = 'as learned';
/** Bounds of the promises: error saved by the plan; forecasts whose plan is off, and the share of them that must say so. */
const LEAST_GAIN = 0.05;
const LEAST_OFF = 10;
const TOLD_SHARE = 0.9;

/** What stands around the planned site. */
export interface Defrosts {
  readonly site: SiteRun;
  readonly watch: PlanWatch;
  /** The same bundle without a plan. */
  readonly withoutPlan: StandIn;
  readonly feed: PlanFeed;
}

/** A watch of the plan; to be made before the fleet, which tells it what it hears. */
export const watchPlan = (): PlanWatch => new PlanWatch(PLANNED.input);

/** Whether forecasts of an origin are made, or their plan judged, on what a wrong plan said. */
export function isWrongPlan(site: SiteRun, timetable: Timetable, tick: number): boolean {
  const [from, to] = wrongTicks(site, timetable);
  return tick >= from && tick < to + site.description.horizon;
}

/** Arms the plan of a site that is about to play. */
export function planDefrosts(
  site: SiteRun,
  seed: number,
  timetable: Timetable,
  fleet: Fleet,
  watch: PlanWatch,
): Defrosts {
  const demo = DEMO_SITES.find(({ name }) => name === site.name);
  const times = demo === undefined ? null : defrostTimesOf(demo, seed);
  if (times === null) throw new Error(`${site.name}: expected a site with defrosts`);
  const topic = planTopic(site.name, PLANNED.input);
  const feed = new PlanFeed({
    times,
    tickMs: site.tickMs,
    firstTick: site.playTick,
    wrong: wrongTicks(site, timetable),
    lateMs: PLAN_LATE_MS,
    publish: (payload) => {
      fleet.publishRetained(topic, payload).catch((error: Error) => site.play?.fail(error));
    },
  });
  site.tickListeners.push((tick) => feed.atTick(tick));
  const withoutPlan = new StandIn(site, site.serving, (origin, digest) => site.labelOf(origin, digest));
  return { site, watch, withoutPlan, feed };
}

function wrongTicks(site: SiteRun, { planWrong, planRight }: Timetable): [number, number] {
  return [site.playTick + Math.round(planWrong * site.perDay), site.playTick + Math.round(planRight * site.perDay)];
}

/** What came of the plan: scores as received and as they would have been without it, and what the forecasts said of it. */
export interface PlanOutcome {
  readonly site: string;
  readonly under: Score | null;
  readonly without: Score | null;
  readonly wrongUnder: Score | null;
  readonly wrongWithout: Score | null;
  readonly right: PlanCounts;
  readonly wrong: PlanCounts;
  readonly published: number;
}

/** Gathers it, once play is over. */
export function planOutcome({ site, watch, withoutPlan, feed }: Defrosts): PlanOutcome {
  const { deviations } = site;
  return {
    site: site.name,
    under: site.scorer.score(RIGHT_PLAN, deviations),
    without: withoutPlan.scorer.score(RIGHT_PLAN, deviations),
    wrongUnder: site.scorer.score(WRONG_PLAN, deviations),
    wrongWithout: withoutPlan.scorer.score(WRONG_PLAN, deviations),
    right: watch.of(RIGHT_PLAN),
    wrong: watch.of(WRONG_PLAN),
    published: feed.published,
  };
}

/** The promises about it. */
export function planVerdicts({ site, under, without, right, wrong }: PlanOutcome): Verdict[] {
  const gain = under === null || without === null ? Number.NaN : 1 - under.mse / without.mse;
  return [
    expectBetween(site, 'forecasts under the plan beat those without', gain, [LEAST_GAIN, 1], asLess),
    expectExactly(site, 'forecasts made without the plan that was there', right.forecasts - right.planned, 0),
    {
      subject: site,
      promise: `at least ${LEAST_OFF} forecasts find their plan not kept; they say so, letter S`,
      outcome: `${wrong.told} of ${wrong.off}`,
      isKept: wrong.off >= LEAST_OFF && wrong.told >= TOLD_SHARE * wrong.off,
    },
    expectExactly(site, 'a plan that is kept is reported wrong', right.told, 0),
  ];
}

/** The same as a sentence for people. */
export function planLine({ site, under, without, wrongUnder, wrongWithout, wrong }: PlanOutcome): string {
  if (under === null || without === null) return `${site}: no forecast under a plan came in`;
  const told =
    `${site}: with the defrosts' plan error ${under.mse.toFixed(3)}, the same bundle without it ` +
    `${without.mse.toFixed(3)} (${under.pairs} pairs)`;
  if (wrongUnder === null || wrongWithout === null) return told;
  return (
    `${told}; under a wrong plan ${wrongUnder.mse.toFixed(3)}, without it ${wrongWithout.mse.toFixed(3)}, and ` +
    `${wrong.told} of ${wrong.forecasts} forecasts said that their plan is not kept (off by ${wrong.worst} at most, ` +
    `${wrong.usual} is usual without one)`
  );
}

const asLess = (x: number): string => `${(100 * x).toFixed(1)} % less error`;
