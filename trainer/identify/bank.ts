/**
 * The fixed feature bank: exponential means, damped resonators and ring lags, all recursive and all blind to the level
 * of the signal. Nothing in it is trained, so nothing in the recursion can blow up; what is learned is linear in it.
 * Poles scale to the tick: memory from 1.5 ticks up, resonators at the period and its harmonics below half the tick rate.
 */

/** Poles of a bank, per tick; the same for every channel. */
export interface Bank {
  /** Decays of exponential means, in (0, 1). */
  readonly decays: readonly number[];
  /** Complex decays, modulus < 1. */
  readonly resonators: readonly (readonly [number, number])[];
  /** Ticks, ascending. */
  readonly lags: readonly number[];
  /** Whether each channel's distance from its mean is one more feature, between resonators and lags. */
  readonly hasLevel?: boolean;
  /** How many resonators, from the first on, a smaller bank may hold; ascending. */
  readonly rungs?: readonly number[];
}

/** What a bank is laid out for. */
export interface BankWish {
  /** Ticks; 0: none. */
  readonly periodTicks: number;
  /** Further periods in ticks, the strongest first. */
  readonly otherPeriods: readonly number[];
  readonly horizon: number;
  readonly learnTicks: number;
  readonly channelCount: number;
}

/** Time constants of the resonators, in periods: one day, three days, a week where the period is a day. */
const RESONATOR_PERIODS = [1, 3, 7] as const;
const HARMONICS = 6;
/** Harmonics of the smallest bank that knows the period. */
const FEW_HARMONICS = 2;
/** Further periods, whose shape matters less, get fewer of either. */
const OTHER_PERIODS = [1, 3] as const;
const OTHER_HARMONICS = 3;
const SHORTEST_MEAN_TICKS = 1.5;
/** Without a period, resonators an octave apart from here on, each remembering one turn: what swings by itself is caught. */
const SHORTEST_TURN_TICKS = 4;
/** Slowest mean, in periods or in horizons, whichever is longer. */
const SLOWEST_MEAN_PERIODS = 8;
const SLOWEST_MEAN_HORIZONS = 4;
const SLOWEST_WITHOUT_PERIOD = 16;
/** Lags of recent readings, as far apart as they are old; and around a period no longer than this, where they stay cheap. */
const RECENT_LAGS = [1, 2, 3, 5, 8, 13, 21, 34, 55] as const;
const LONGEST_LAGGED_PERIOD = 64;
/** Features of all channels together: fits cost their cube. Few channels never reach it; many get smaller banks each. */
const MOST_FEATURES = 768;
const LEAST_FEATURES = 6;

/**
 * The widest bank worth trying on a history. Resonators of the period come first, each memory with all its harmonics, then
 * those of further periods. Where channels are many, lags go first, then the rest from its end, then every second mean.
 *
 * shapes  none
 * units   ticks
 * throws  nothing
 * source  time constants doubling from 1.5 ticks, so that neighbouring means differ by an octave (common practice)
 * cost    trivial
 */
export function designBank(wish: BankWish): Bank {
  const { periodTicks, otherPeriods, horizon, learnTicks, channelCount } = wish;
  const longest = learnTicks / 10;
  const longestTurn = learnTicks / 4;
  const horizons = periodTicks > 0 ? SLOWEST_MEAN_HORIZONS : SLOWEST_WITHOUT_PERIOD;
  const wanted = Math.max(SLOWEST_MEAN_PERIODS * periodTicks, horizons * horizon, 16);
  const decays: number[] = [];
  for (let tau = SHORTEST_MEAN_TICKS; tau <= Math.min(wanted, longest); tau *= 2) decays.push(Math.exp(-1 / tau));
  const resonators: (readonly [number, number])[] = [];
  const rungs: number[] = [];
  if (periodTicks > 0) {
    resonators.push(...resonatorsOf(periodTicks, RESONATOR_PERIODS, HARMONICS, longestTurn));
    const first = Math.min(HARMONICS, Math.ceil(periodTicks / 2) - 1);
    rungs.push(Math.min(FEW_HARMONICS, first), first, resonators.length);
  }
  for (const other of otherPeriods) {
    resonators.push(...resonatorsOf(other, OTHER_PERIODS, OTHER_HARMONICS, longestTurn));
    rungs.push(resonators.length);
  }
  if (periodTicks === 0) {
    for (let period = SHORTEST_TURN_TICKS; period <= Math.min(wanted, longest); period *= 2) {
      resonators.push(resonator(period, period, 1));
    }
    rungs.push(Math.ceil(resonators.length / 3));
  }
  const most = Math.max(LEAST_FEATURES, Math.floor(MOST_FEATURES / channelCount));
  return cutBank({ decays, resonators, lags: lagsOf(periodTicks, longest), hasLevel: true, rungs }, most);
}

/** Resonators of a period and its harmonics, one memory after the other; memories beyond `longest` but for the first left out. */
function resonatorsOf(
  period: number,
  memories: readonly number[],
  harmonics: number,
  longest: number,
): (readonly [number, number])[] {
  return memories.flatMap((periods) => {
    const tau = periods * period;
    if (tau > longest && periods > 1) return [];
    const count = Math.min(harmonics, Math.ceil(period / 2) - 1);
    return Array.from({ length: count }, (_, m) => resonator(tau, period, m + 1));
  });
}

/** A bank of at most so many features. */
function cutBank(bank: Bank, most: number): Bank {
  let { decays, resonators, lags } = bank;
  const count = (): number => featureCount({ ...bank, decays, resonators, lags });
  while (count() > most && lags.length > 0) lags = lags.slice(0, -1);
  while (count() > most && resonators.length > 0) resonators = resonators.slice(0, -1);
  while (count() > most && decays.length > 2) decays = decays.filter((_, k) => k % 2 === 0);
  return { ...bank, decays, resonators, lags };
}

/** Recent lags, and those around the period: the same time a period ago, and its neighbours. */
function lagsOf(periodTicks: number, longest: number): number[] {
  const around = periodTicks > 0 && periodTicks <= LONGEST_LAGGED_PERIOD ? [-1, 0, 1].map((d) => periodTicks + d) : [];
  return [...new Set([...RECENT_LAGS, ...around])].filter((lag) => lag <= longest).sort((a, b) => a - b);
}

/** Complex decay per tick of a resonator at the m-th harmonic of a period, memory tau. */
function resonator(tau: number, periodTicks: number, m: number): readonly [number, number] {
  const radius = Math.exp(-1 / tau);
  const angle = (2 * Math.PI * m) / periodTicks;
  return [radius * Math.cos(angle), radius * Math.sin(angle)];
}

/**
 * Features a channel: one a mean, two a resonator, one for the level, one a lag.
 *
 * shapes  none
 * units   a count
 * throws  nothing
 * source  none
 * cost    trivial
 */
export function featureCount(bank: Bank): number {
  return bank.decays.length + 2 * bank.resonators.length + (bank.hasLevel === true ? 1 : 0) + bank.lags.length;
}

/**
 * Ticks until the start of a run no longer shows: four of the longest time constant, or the longest lag.
 *
 * shapes  none
 * units   ticks
 * throws  nothing
 * source  exp(-4) < 2 %
 * cost    trivial
 */
export function settlingTicks(bank: Bank): number {
  let slowest = 0;
  for (const decay of bank.decays) slowest = Math.max(slowest, decay);
  for (const [re, im] of bank.resonators) slowest = Math.max(slowest, Math.hypot(re, im));
  const memory = slowest > 0 ? -4 / Math.log(slowest) : 0;
  return Math.ceil(Math.max(memory, ...bank.lags, 1));
}

/** A name for people: what the bank holds. */
export function bankName(bank: Bank): string {
  const parts = [`${bank.decays.length} means`];
  if (bank.resonators.length > 0) parts.push(`${bank.resonators.length} resonators`);
  if (bank.hasLevel === true) parts.push('the level');
  if (bank.lags.length > 0) parts.push(`${bank.lags.length} lags`);
  return parts.join(', ');
}
