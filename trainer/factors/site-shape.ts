/** What factors are gathered for a site: how far they reach, and for which horizons and rounds. */
import { MAX_HORIZON, MAX_ROUND_TICKS, type Site, schemaHash, toHex } from '@stillwell/protocol';
import { channelsOf } from '../history/channels.ts';
import type { FactorsShape } from './factors.ts';

const DAY_MS = 86_400_000;
/** A day is a bank's period where it is between these, ticks; without one, a peak of the spectrum up to the last. */
const SHORTEST_PERIOD = 4;
const LONGEST_PERIOD = 2000;
const LONGEST_PEAK = 1024;
/** A bank's slowest memory: eight periods; three of a further one; sixteen horizons without a period, four with one. */
const PERIODS = 8;
const OTHER_PERIODS = 3;
const HORIZONS = 16;
/** Memories that are reached: what is left of a memory by then is e^-12. Of a further period's, which are rare, e^-8. */
const MEMORIES = 12;
const OTHER_MEMORIES = 8;
/** Bytes of the spectra while gathering; many channels reach less far, as their banks do. */
const SPECTRA_BYTES = 512 * 1024 * 1024;
/** Numbers of a pair's spectra where lags are shared out. */
const SHARED_NUMBERS = 2 * 65_536;
/** As when learning from a history: a gap of this many ticks is long, whatever the horizon. */
const LEAST_LONG_GAP = 6;

/**
 * The shape of a site's factors.
 *
 * shapes  none
 * units   ticks
 * throws  nothing
 * source  the slowest memories of `designBank`
 * cost    trivial
 */
export function shapeOf(site: Site, halfLifeTicks: number | null): FactorsShape {
  const channels = channelsOf(site);
  const { tickMs, horizon } = site;
  const day = Math.round(DAY_MS / tickMs);
  const isDaily = day >= SHORTEST_PERIOD && day <= LONGEST_PERIOD;
  const slowest = Math.max(PERIODS * (isDaily ? day : LONGEST_PEAK), HORIZONS * horizon);
  const other = OTHER_PERIODS * Math.max(LONGEST_PEAK, 7 * day <= LONGEST_PERIOD ? 7 * day : 0);
  const rounds = [7 * day, day].filter((ticks) => ticks <= MAX_ROUND_TICKS && ticks >= horizon);
  const wanted = Math.max(MEMORIES * slowest, OTHER_MEMORIES * other);
  // With near and far lags shared out, every reach takes about as much; what does not fit gets one transform that does.
  const each = SPECTRA_BYTES / 8 / (channels.length * channels.length);
  const most = each >= SHARED_NUMBERS ? wanted : Math.max(1024, (2 / 3) * 2 ** Math.floor(Math.log2(each)));
  return Object.freeze({
    site: site.site,
    tickMs,
    names: channels.map(({ name }) => name),
    units: channels.map(({ unit }) => unit),
    signalCount: site.signals.length,
    schema: toHex(schemaHash(site)),
    halfLifeTicks,
    reach: Math.floor(Math.min(wanted, most)),
    longestHorizon: Math.min(MAX_HORIZON, 2 * horizon),
    longestRound: rounds[0] ?? 0,
    longGapTicks: Math.max(LEAST_LONG_GAP, horizon),
  });
}
