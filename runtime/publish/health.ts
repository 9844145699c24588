/** The health message: status, counts, the last change of bundle, versions. */
import {
  ARITHMETIC,
  BUNDLE_FORMAT,
  type BundleChange,
  type HealthFacts,
  type HealthStatus,
  healthMessage,
  MESSAGE_FORMAT,
  SEGMENT_FORMAT,
} from '@stillwell/protocol';
import type { Engine } from '../engine.ts';
import type { ShipCounts } from '../residuals/ship.ts';
import { VERSION } from '../version.ts';
import { inputOutlooks, planFault } from './inputs.ts';
import { type Judged, judge } from './quality.ts';
import { signalsHealth } from './signals.ts';

/** 9999-12-31: what a will says stays true until it is replaced. */
const FOREVER_MS = 253_402_300_799_000;
/** A clock is put right by less than this every now and then. */
const CLOCK_AHEAD_TICKS = 3;
const VERSIONS = {
  stillwell: VERSION,
  node: process.versions.node,
  arithmetic: String(ARITHMETIC),
  bundle_format: String(BUNDLE_FORMAT),
  segment_format: String(SEGMENT_FORMAT),
  message_format: String(MESSAGE_FORMAT),
};

/** What health is said of. */
export interface HealthReport {
  readonly site: string;
  readonly gateway: string;
  readonly nowMs: number;
  /** Null where ticks close by the readings' own time; otherwise ms. */
  readonly wallTickMs: number | null;
  /** Why the gateway itself needs somebody to look after it, such as a clock that is not sure; null: it does not. */
  readonly doubt?: string | null;
  /** How long the message holds without a new one. */
  readonly holdsMs: number;
  readonly status: HealthStatus;
  readonly lastChange: BundleChange | null;
  readonly engine: Engine;
  readonly ship: ShipCounts;
  /** Times the connection was lost. */
  readonly reconnects: number;
  /** Further counts, of what lies outside the engine. */
  readonly counts?: Readonly<Record<string, number | Readonly<Record<string, number>>>>;
}

/** What the broker says when the gateway vanishes. */
export function willPayload(site: string, gateway: string, nowMs: number): Uint8Array {
  return healthMessage({
    site,
    gateway,
    bundle: null,
    sequence: null,
    issuedAtMs: nowMs,
    validUntilMs: FOREVER_MS,
    quality: 'F',
    qualityReason: 'the gateway vanished without a word',
    status: 'lost',
    counters: {
      readings: 0,
      refused: {},
      late: 0,
      ticks: 0,
      segments_open: 0,
      segments_waiting: 0,
      segments_confirmed: 0,
    },
    lastChange: null,
    versions: VERSIONS,
  });
}

/** Payload for the site's health topic. */
export function healthPayload(report: HealthReport): Uint8Array {
  const { engine, ship, status, nowMs } = report;
  const { counters, journal, spool } = engine;
  const checked = engine.serving?.checked ?? null;
  return healthMessage({
    site: report.site,
    gateway: report.gateway,
    bundle: checked?.digest ?? null,
    sequence: checked?.sequence ?? null,
    issuedAtMs: nowMs,
    validUntilMs: status === 'stopped' ? FOREVER_MS : nowMs + report.holdsMs,
    ...judgeGateway(report),
    status,
    counters: {
      readings: counters.readings,
      refused: counters.refused,
      late: counters.late,
      corrections: counters.corrections,
      duplicates: counters.duplicates,
      passed_over: engine.watch.passedOver.reduce((sum, count) => sum + count, 0),
      hanging: engine.watch.hanging,
      drifting: engine.watch.drifting,
      astray: { ...engine.takeover.ladder.counts },
      ticks: counters.ticks,
      ticks_skipped: counters.skippedTicks,
      segments_open: journal.ticks > 0 ? 1 : 0,
      segments_waiting: spool.waiting.length,
      segments_confirmed: ship.confirmed,
      segments_closed: journal.counts.closed,
      segments_sent: ship.sent,
      segments_resent: ship.resent,
      segments_parked: ship.parked,
      segments_in_conflict: ship.conflicts,
      segments_shed: journal.counts.shedSegments,
      segments_shed_bytes: journal.counts.shedBytes,
      ticks_shed: journal.counts.shedTicks,
      segments_lost: journal.counts.lost + spool.damaged,
      ...furtherCounts(report),
      ...sparkplugCounts(engine),
      ...budgetCounts(engine),
      spool_bytes: spool.bytes,
      reconnects: report.reconnects,
    },
    lastChange: report.lastChange,
    ...signalsOf(report),
    ...divergenceOf(engine),
    versions: VERSIONS,
  });
}

/** Ages are those of the readings' own time where ticks close by it. */
function signalsOf({ engine, nowMs, wallTickMs }: HealthReport): Pick<HealthFacts, 'signals'> {
  const { serving, watch, aligner } = engine;
  if (serving === null || serving.tick < 0) return {};
  return {
    signals: signalsHealth(serving, watch, aligner.lastReadingMs, wallTickMs === null ? aligner.newestMs : nowMs),
  };
}

/** Nothing while the filter is well. */
function divergenceOf({ takeover, site }: Engine): Pick<HealthFacts, 'divergence'> {
  const { present } = takeover.ladder;
  if (present === null) return {};
  const { step, sinceTick, reason } = present;
  return { divergence: { step, sinceMs: (sinceTick + 1) * site.tickMs, reason } };
}

/** Nothing of plans at sites without them. */
function furtherCounts({ engine, counts }: HealthReport): Record<string, number | Readonly<Record<string, number>>> {
  const { plans } = engine;
  return { ...(plans.filters.length === 0 ? {} : { plans: plans.taken, plans_refused: plans.refused }), ...counts };
}

/** Nothing at sites without that standard. */
function sparkplugCounts({ decoder }: Engine): Record<string, Readonly<Record<string, number>>> {
  return decoder.sparkplug === null ? {} : { sparkplug: { ...decoder.sparkplug.counts } };
}

/** What resolution has been shed, by channel: so many of the sensor's steps are one of the record's. */
function budgetCounts({ budget, site }: Engine): Record<string, number | Readonly<Record<string, number>>> {
  const shed: Record<string, number> = {};
  [...site.signals, ...site.inputs].forEach(({ name }, c) => {
    if (budget.coarseness[c]! > 0) shed[name] = 2 ** budget.coarseness[c]!;
  });
  const counts = { segment_bytes_a_day: Math.round(budget.projectedBytes), budget_exceeded: budget.isShort ? 1 : 0 };
  return Object.keys(shed).length === 0 ? counts : { ...counts, resolution_shed: shed };
}

function judgeGateway(report: HealthReport): Judged {
  const { engine, status } = report;
  const { serving, journal } = engine;
  if (status === 'stopped') return { quality: 'F', qualityReason: 'stopped' };
  const { fault } = journal;
  if (serving === null)
    return {
      quality: 'F',
      qualityReason: `no bundle serves yet: ${fault === null ? 'recording' : `nothing is being kept on disk: ${fault}`}`,
    };
  if (fault !== null) return { quality: 'M', qualityReason: `nothing is being kept on disk: ${fault}` };
  const outlooks = inputOutlooks(serving, engine.plans, engine.site, report.nowMs);
  return judgeClock(report) ?? judge(serving, false, null, planFault(serving, engine.plans, outlooks, null));
}

/** By the wall clock no tick closes before its end: one closed ahead of now says that the clock was set back. */
function judgeClock({ engine, nowMs, wallTickMs, doubt = null }: HealthReport): Judged | null {
  if (doubt !== null) return { quality: 'M', qualityReason: doubt };
  const { nextTick } = engine.aligner;
  if (wallTickMs === null || nextTick === null) return null;
  const closedToMs = nextTick * wallTickMs;
  if (closedToMs - nowMs < CLOCK_AHEAD_TICKS * wallTickMs) return null;
  const until = new Date(closedToMs).toISOString();
  return {
    quality: 'M',
    qualityReason: `the clock was set back: nothing is forecast before ${until}, or before the record starts anew`,
  };
}
