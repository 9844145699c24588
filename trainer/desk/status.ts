/**
 * What a desk holds, site by site: counts, span, cost per reading, and how the one-step residuals stand against what the
 * bundle expected. Reads the store only; a desk may be collecting into it meanwhile.
 */
import { Layouts } from './layouts.ts';
import { type Store, toBytes } from './store/open.ts';

/** Residuals of one signal; bias and spread as shares of the bundle's expected spread: 0 and 1 are as expected. */
export interface ResidualHealth {
  readonly signal: string;
  readonly count: number;
  /** null where the bundle has no residual of the signal yet. */
  readonly bias: number | null;
  readonly sdRatio: number | null;
  /** The same over the last seven days of ticks; null where nothing was read in them. */
  readonly recentBias: number | null;
  readonly recentSdRatio: number | null;
}

/** One site of a desk. */
export interface SiteStatus {
  readonly site: string;
  readonly gateways: readonly string[];
  readonly segments: number;
  readonly doubled: number;
  readonly conflicts: number;
  readonly waitingForBundle: number;
  readonly waitingForPredecessor: number;
  /** Numbers of missing predecessors and digests of missing bundles, for the person who can mend it. */
  readonly waitsFor: readonly string[];
  readonly broken: number;
  readonly brokenReason: string | null;
  readonly refused: number;
  readonly refusedReason: string | null;
  readonly fromMs: number | null;
  readonly toMs: number | null;
  readonly ticks: number;
  readonly readings: number;
  readonly bitsPerReading: number | null;
  readonly corrections: number;
  /** Ticks with a signal coarser than its sensor, which the gateway's byte budget, or its spool, made so. */
  readonly coarseTicks: number;
  /** Signals and inputs coarser than their sensors at the last tick: steps of the sensor to one of the record. */
  readonly coarse: readonly { readonly channel: string; readonly steps: number }[];
  readonly lastSeenMs: number | null;
  /** Digest of the bundle of the latest decoded segment. */
  readonly bundle: string | null;
  /** Signals under that bundle. */
  readonly residuals: readonly ResidualHealth[];
}

const RECENT_MS = 7 * 86_400_000;

/** Status of every site seen, by name. */
export async function readStatus(store: Store): Promise<SiteStatus[]> {
  const counts = await countSites(store);
  const refusals = await store.db.selectFrom('refusals').selectAll().orderBy('last_ms').execute();
  const names = new Set([...counts.map((row) => row.site), ...refusals.map((row) => row.site)]);
  const layouts = new Layouts(store);
  const statuses: SiteStatus[] = [];
  for (const site of [...names].sort()) {
    const refused = refusals.filter((row) => row.site === site);
    statuses.push({
      site,
      ...fromCounts(counts.find((row) => row.site === site)),
      ...(await ofSegments(store, site)),
      ...(await ofSpans(store, layouts, site)),
      refused: refused.reduce((sum, row) => sum + row.count, 0),
      refusedReason: refused.at(-1)?.message ?? null,
    });
  }
  return statuses;
}

function countSites(store: Store) {
  return store.db
    .selectFrom('segments')
    .select(({ fn, eb }) => [
      'site',
      fn.countAll<number>().as('segments'),
      fn.sum<number>('copies').as('doubled'),
      fn.sum<number>('readings').as('readings'),
      fn.sum<number>(eb.case().when('state', '=', 'decoded').then(eb.ref('size')).else(0).end()).as('bytes'),
      fn.max('last_ms').as('last_ms'),
    ])
    .groupBy('site')
    .execute();
}

function fromCounts(row: Awaited<ReturnType<typeof countSites>>[number] | undefined) {
  const readings = Number(row?.readings ?? 0);
  return {
    segments: Number(row?.segments ?? 0),
    doubled: Number(row?.doubled ?? 0),
    readings,
    bitsPerReading: readings > 0 ? (Number(row!.bytes) * 8) / readings : null,
    lastSeenMs: row ? Number(row.last_ms) : null,
  };
}

async function ofSegments(store: Store, site: string) {
  const rows = await store.db
    .selectFrom('segments')
    .select(['gateway', 'stream', 'number', 'state', 'reason', 'bundle'])
    .where('site', '=', site)
    .where('state', '!=', 'decoded')
    .orderBy('gateway')
    .orderBy('stream')
    .orderBy('number')
    .execute();
  const gateways = await store.db
    .selectFrom('segments')
    .select('gateway')
    .distinct()
    .where('site', '=', site)
    .execute();
  const conflicts = await store.db
    .selectFrom('conflicts')
    .select(({ fn }) => fn.countAll<number>().as('count'))
    .where('site', '=', site)
    .executeTakeFirstOrThrow();
  const kept = new Set(rows.map((row) => `${row.gateway} ${row.stream} ${row.number}`));
  const waitsFor = new Set<string>();
  for (const row of rows.filter((one) => one.state === 'waiting')) {
    if (row.reason === 'bundle') waitsFor.add(`bundle ${row.bundle}`);
    else if (!kept.has(`${row.gateway} ${row.stream} ${row.number - 1}`))
      waitsFor.add(`segment ${row.number - 1} of ${row.gateway}, stream ${row.stream}`);
  }
  const broken = rows.filter((row) => row.state === 'broken');
  return {
    gateways: gateways.map((row) => row.gateway).sort(),
    conflicts: Number(conflicts.count),
    waitingForBundle: rows.filter((row) => row.state === 'waiting' && row.reason === 'bundle').length,
    waitingForPredecessor: rows.filter((row) => row.state === 'waiting' && row.reason !== 'bundle').length,
    waitsFor: [...waitsFor],
    broken: broken.length,
    brokenReason: broken[0]?.reason ?? null,
  };
}

async function ofSpans(store: Store, layouts: Layouts, site: string) {
  const spans = await store.db
    .selectFrom('spans')
    .select(['segment', 'bundle', 'first_tick', 'ticks', 'coarseness'])
    .where('site', '=', site)
    .orderBy('first_tick')
    .execute();
  const corrections = await store.db
    .selectFrom('corrections')
    .select(({ fn }) => fn.countAll<number>().as('count'))
    .where('site', '=', site)
    .executeTakeFirstOrThrow();
  const last = spans.at(-1);
  const known = last ? await layouts.find(last.bundle) : null;
  if (!last || !known) {
    return { fromMs: null, toMs: null, ticks: 0, corrections: 0, ...NOTHING_COARSE, bundle: null, residuals: [] };
  }
  const { isOfBundle, layout } = known;
  const { tickMs, channels } = layout;
  const toTick = last.first_tick + last.ticks;
  const recent = toTick - Math.ceil(RECENT_MS / tickMs);
  const all = await sumResiduals(store, site, last.bundle, 0);
  const late = await sumResiduals(store, site, last.bundle, recent);
  const signals = channels.filter((channel) => channel.role === 'signal').map((channel) => channel.name);
  return {
    fromMs: spans[0]!.first_tick * tickMs,
    toMs: toTick * tickMs,
    ticks: spans.reduce((sum, span) => sum + span.ticks, 0),
    corrections: Number(corrections.count),
    coarseTicks: spans.reduce((sum, span) => sum + (span.coarseness === null ? 0 : span.ticks), 0),
    coarse: last.coarseness === null ? [] : coarseChannels(channels, toBytes(last.coarseness)),
    bundle: isOfBundle ? last.bundle : null,
    // Without a bundle nothing was forecast: there are no residuals to judge.
    residuals: !isOfBundle
      ? []
      : signals.map((signal, channel) => healthOf(signal, all.get(channel), late.get(channel))),
  };
}

const NOTHING_COARSE = { coarseTicks: 0, coarse: [] };

function coarseChannels(channels: readonly { readonly name: string }[], coarseness: Uint8Array) {
  return channels.flatMap(({ name }, c) => (coarseness[c]! > 0 ? [{ channel: name, steps: 2 ** coarseness[c]! }] : []));
}

interface Sums {
  readonly count: number;
  readonly sum: number;
  readonly squareSum: number;
}

async function sumResiduals(store: Store, site: string, bundle: string, fromTick: number): Promise<Map<number, Sums>> {
  const rows = await store.db
    .selectFrom('residuals')
    .innerJoin('spans', 'spans.segment', 'residuals.segment')
    .select(({ fn }) => [
      'residuals.channel',
      fn.sum<number>('residuals.count').as('count'),
      fn.sum<number>('residuals.sum').as('sum'),
      fn.sum<number>('residuals.square_sum').as('squareSum'),
    ])
    .where('spans.site', '=', site)
    .where('spans.bundle', '=', bundle)
    .where('spans.first_tick', '>=', fromTick)
    .groupBy('residuals.channel')
    .execute();
  return new Map(
    rows.map((row) => [
      row.channel,
      { count: Number(row.count), sum: Number(row.sum), squareSum: Number(row.squareSum) },
    ]),
  );
}

function healthOf(signal: string, all: Sums | undefined, late: Sums | undefined): ResidualHealth {
  const whole = moments(all);
  const recent = moments(late);
  return {
    signal,
    count: all?.count ?? 0,
    bias: whole?.bias ?? null,
    sdRatio: whole?.sd ?? null,
    recentBias: recent?.bias ?? null,
    recentSdRatio: recent?.sd ?? null,
  };
}

function moments(sums: Sums | undefined): { bias: number; sd: number } | null {
  if (!sums || sums.count === 0) return null;
  const bias = sums.sum / sums.count;
  return { bias, sd: Math.sqrt(Math.max(0, sums.squareSum / sums.count - bias * bias)) };
}
