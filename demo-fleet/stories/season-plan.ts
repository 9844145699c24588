/**
 * The season's calendar: when the stretches of play begin, which sensors fail, and what befalls gateways, links and desk.
 */
import type { Fault, Roughness } from '../faults.ts';
import type { LogHabit } from '../history-files.ts';

/** A Monday; the zones of the sites have no clock changes. */
export const PLAY_MS = Date.UTC(2025, 3, 28);
/** Days of log before play: enough for weekly habits to show, few enough to fit in seconds. */
export const HISTORY_DAYS = 24;
/** Days of play unless asked otherwise. */
export const DEFAULT_DAYS = 4;
/** How the sites' logs are kept, in the order of the sites. */
export const HABITS: readonly LogHabit[] = ['wide-utc', 'long', 'wide-utc', 'wide-local', 'wide-utc', 'long'];
/** How rough the way from the sensors is. */
export const ROUGH: Roughness = {
  lateShare: 0.01,
  lateTicks: 1,
  veryLateShare: 0.0005,
  veryLateTicks: 12,
  doubledShare: 0.01,
};
/** Every how many-th segment message is sent twice. */
export const DOUBLE_EVERY = 7;
/** Ticks in a segment: eight a day, but no shorter than pays for a segment's head. */
export const segmentTicks = (ticksPerDay: number): number => Math.max(144, Math.round(ticksPerDay / 8));
/** The plant that wears, and how far it is gone: its pumps have lost nearly a fifth of their head. */
export const WORN_SITE = 'brackwith';
/** How far gone the pumps are, of 1. */
export const WEAR = 0.6;
/** Sites whose gateway loses power, and whose link is cut. */
export const POWER_CUT_SITE = 'quennadale';
/** The site whose link is cut. */
export const LINK_CUT_SITE = 'ellerquint';

/** The site whose defrosts are planned, the signal whose forecasts are asked about it, and how late a wrong plan is. */
export const PLANNED_SITE = 'tessenby';
/** The planned input and the signal that says what came of it. */
export const PLANNED = { input: 'defrost', signal: 'room' } as const;
/**
 * Share of the best rival's error that a site's forecasts must save at least. Wells beat them easily; a store's doors open
 * when somebody comes, which nothing foretells, the less so the larger a share of its heat comes in by them.
 */
export const LEAST_SKILL: Readonly<Record<string, number>> = {
  quennadale: 0.84,
  brackwith: 0.78,
  ellerquint: 0.78,
  penvarrow: 0.4,
  tessenby: 0.4,
  stavendrith: 0.35,
};
/** A wrong plan tells the runs this much later than they come. */
export const PLAN_LATE_MS = 76 * 60_000;

/** Days from the start of play. */
export interface Timetable {
  /** Filters are warm from here on; forecasts count. */
  readonly learned: number;
  readonly powerCut: number;
  readonly linkCut: number;
  readonly deskAway: number;
  readonly deskBack: number;
  /** The plant has worn, and the new bundle is rolled. */
  readonly worn: number;
  readonly refitted: number;
  /** The plan of the defrosts goes wrong, and is put right. */
  readonly planWrong: number;
  readonly planRight: number;
  readonly end: number;
}

const WARM_DAYS = 0.8;

/** Lays the season over a number of days, at least four. */
export function timetableOf(days: number): Timetable {
  const at = (share: number): number => WARM_DAYS + (days - WARM_DAYS) * share;
  return {
    learned: WARM_DAYS,
    powerCut: at(0.06),
    linkCut: at(0.1),
    deskAway: at(0.14),
    deskBack: at(0.2),
    worn: at(0.3),
    refitted: at(0.7),
    planWrong: at(0.6),
    planRight: at(0.9),
    end: days,
  };
}

/** Sensors that fail in play, by site; ticks from the start of play. */
export function faultsOf(site: string, ticksPerDay: number): readonly Fault[] {
  const span = (kind: Fault['kind'], channel: number, fromDay: number, hours: number, perTick = 0): Fault => ({
    kind,
    channel,
    from: Math.round(fromDay * ticksPerDay),
    until: Math.round((fromDay + hours / 24) * ticksPerDay),
    perTick,
  });
  if (site === 'ellerquint') return [span('silent', 2, 1.1, 3), span('silent', 0, 1.5, 0.5)];
  if (site === 'tessenby') return [span('stuck', 1, 1.2, 1.5)];
  if (site === 'stavendrith') return [span('drift', 2, 0.9, 24, 0.001)];
  return [];
}
