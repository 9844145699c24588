/**
 * When the forecasts were worst: days (or hours, or minutes, where the judged time is short) by their mean squared error, for
 * each signal and for all of them together.
 */
import type { Hindcast } from './hindcast.ts';
import { meanOf } from './scores.ts';

/** One stretch of time and how the forecasts made in it did. */
export interface Spell {
  readonly fromMs: number;
  /** Mean squared error of the paths begun in it, over the squared standard deviation of the learning part. */
  readonly mseStandardised: number;
  /** The same over the usual one, the mean of all stretches. */
  readonly timesUsual: number;
  readonly origins: number;
}

/** The worst stretches, worst first. */
export interface WorstSpells {
  /** Length of a stretch; they begin at whole multiples of it since 1970 UTC. */
  readonly spellMs: number;
  /** Over all signals, each standardised. */
  readonly overall: readonly Spell[];
  /** (ny) */
  readonly bySignal: readonly (readonly Spell[])[];
}

const DAY_MS = 86_400_000;
/** Lengths of a stretch, of which the longest is taken that comes at least four times. */
const LENGTHS_MS = [DAY_MS, 21_600_000, 3_600_000, 600_000, 60_000] as const;
const LEAST_SPELLS = 4;

/**
 * Finds them.
 *
 * shapes  at most `most` stretches each
 * units   standardised²
 * throws  nothing
 * source  own choice
 * cost    O(ny · origins)
 */
export function worstSpells(hindcast: Hindcast, most: number): WorstSpells {
  const { toMs, fromMs, pathLoss, scale } = hindcast;
  const spellMs = LENGTHS_MS.find((ms) => (toMs - fromMs) / ms >= LEAST_SPELLS) ?? hindcast.tickMs;
  const standardised = pathLoss.map((losses, i) => losses.map((loss) => loss / scale[i] ** 2));
  const across = new Float64Array(standardised.length);
  const together = hindcast.originMs.map((_, k) => {
    for (let i = 0; i < across.length; i++) across[i] = standardised[i][k];
    return meanOf(across);
  });
  return {
    spellMs,
    overall: worst(hindcast, together, spellMs, most),
    bySignal: standardised.map((losses) => worst(hindcast, losses, spellMs, most)),
  };
}

function worst({ originMs }: Hindcast, losses: Float64Array, spellMs: number, most: number): Spell[] {
  const sums = new Map<number, { sum: number; origins: number }>();
  losses.forEach((loss, k) => {
    if (Number.isNaN(loss)) return;
    const fromMs = Math.floor(originMs[k] / spellMs) * spellMs;
    const own = sums.get(fromMs) ?? { sum: 0, origins: 0 };
    sums.set(fromMs, { sum: own.sum + loss, origins: own.origins + 1 });
  });
  const usual = meanOf(losses);
  return [...sums]
    .map(([fromMs, { sum, origins }]) => {
      const mseStandardised = sum / origins;
      return { fromMs, mseStandardised, timesUsual: usual > 0 ? mseStandardised / usual : 1, origins };
    })
    .sort((a, b) => b.mseStandardised - a.mseStandardised || a.fromMs - b.fromMs)
    .slice(0, most);
}

/** The stretch as people write it: the day, or the day and minute. */
export function spellName(fromMs: number, spellMs: number): string {
  const text = new Date(fromMs).toISOString();
  return spellMs >= DAY_MS ? text.slice(0, 10) : `${text.slice(0, 16).replace('T', ' ')} UTC`;
}
